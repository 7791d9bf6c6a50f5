"""The study file: one TOML file that says what is asked of which data, under which beliefs."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal, cast

from bayesmed.conclusions.claim import Claim
from bayesmed.core.errors import ArgumentError, StudyFileError
from bayesmed.priors import Coefficients, Prior, coefficient_from_spec, from_spec, panel
from bayesmed.report.strict import StrictTable, described, is_single

if TYPE_CHECKING:
    import pandas as pd

    from bayesmed.study.observe import Observed

TOP = (
    "title", "data", "exposure", "contrast", "mediator", "outcome", "moderators", "ci_prob",
    "beliefs", "claim", "at", "fit", "coefficients",
)  # fmt: skip
CLAIM = ("effect", "above", "below", "required")
FIT = ("method", "draws", "tune", "chains", "random_seed", "learn")
COEFFICIENTS = ("mediator", "outcome", "sigma_mediator", "sigma_outcome", "scale")


@dataclass(frozen=True)
class FitRequest:
    """How a study file asks to be fitted; the same words and defaults as ``Study.fit``.

    Attributes
    ----------
    method : {"nuts", "exact"}
    draws, tune, chains : int
    random_seed : int or None
        None makes a new one.
    learn : bool
        False holds the posterior of rho at its prior where formulas or priors would inform it.
    """

    method: Literal["nuts", "exact"] = "nuts"
    draws: int = 1000
    tune: int = 1000
    chains: int = 4
    random_seed: int | None = None
    learn: bool = True


@dataclass(frozen=True, eq=False)
class StudyFile:
    """What a study file says, checked.

    Attributes
    ----------
    path, data : Path
        The file itself, and the data it names, resolved against its folder.
    title : str
    exposure, mediator, outcome : str
    contrast : pair or None
    moderators : tuple of str or None
    ci_prob : float
    beliefs : dict of str to Prior
        By label, in the file's order; the documented default set where the file has none.
    own_beliefs : bool
        False where the default set stands in.
    claim : Claim
    at : dict or None
        Moderator values; None takes the default ones, an empty dict averages over all rows.
    fit : FitRequest
    coefficients : Coefficients or None
    """

    path: Path
    data: Path
    title: str
    exposure: str
    mediator: str
    outcome: str
    contrast: tuple[Any, Any] | None
    moderators: tuple[str, ...] | None
    ci_prob: float
    beliefs: dict[str, Prior]
    own_beliefs: bool
    claim: Claim
    at: dict[str, Any] | None
    fit: FitRequest
    coefficients: Coefficients | None

    def frame(self) -> "pd.DataFrame":
        """Return the data.

        Raises
        ------
        StudyFileError
            If the data cannot be read.
        """
        import pandas as pd

        try:
            return pd.read_parquet(self.data) if self.data.suffix == ".parquet" else pd.read_csv(self.data)
        except ImportError as error:
            raise StudyFileError(
                f"{self.path.name}: data is {self.data.name}, and reading Parquet needs pyarrow; install it "
                "(pip install pyarrow) or give a .csv file"
            ) from error
        except (OSError, ValueError) as error:
            reason = str(error).splitlines()[0] if str(error) else type(error).__name__
            raise StudyFileError(f"{self.path.name}: data {self.data.name!r} cannot be read: {reason}") from error

    def observe(self) -> "Observed":
        """Read the data and return what was observed; errors as in ``Study``, and of :meth:`frame`."""
        from bayesmed.study.observe import observe

        return observe(
            self.frame(),
            exposure=self.exposure,
            contrast=self.contrast,
            mediator=self.mediator,
            outcome=self.outcome,
            moderators=self.moderators,
        )


def read_study_file(path: str | Path) -> StudyFile:
    """Read a study file and check every key and value of it.

    Parameters
    ----------
    path : str or Path
        A TOML file. At the top: title (optional), data (a .csv or .parquet file, relative to this one),
        exposure, contrast (optional pair), mediator, outcome (formulas), moderators (optional list), ci_prob
        (0.95). Tables, all optional: ``[beliefs]`` label = number or table; ``[claim]`` effect, above or
        below, required; ``[at]`` moderator = value or list; ``[fit]`` method, draws, tune, chains,
        random_seed, learn; ``[coefficients]`` mediator and outcome (tables term = prior), sigma_mediator,
        sigma_outcome, scale.

    Returns
    -------
    StudyFile

    Raises
    ------
    StudyFileError
        With the file, the place in it, what was found there and what is allowed.
    """
    path = Path(path)
    values = _toml(path)
    try:
        return _checked(path, values)
    except StudyFileError as error:
        raise StudyFileError(f"{path.name}: {error}") from None


def _toml(path: Path) -> dict[str, Any]:
    import tomllib

    try:
        text = path.read_bytes().decode("utf-8-sig")
    except OSError as error:
        raise StudyFileError(f"study file {str(path)!r} cannot be read: {error.strerror or error}") from error
    except UnicodeDecodeError as error:
        raise StudyFileError(f"{path.name}: byte {error.start} is not UTF-8; save the file as UTF-8 text") from error
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise StudyFileError(f"{path.name} is not valid TOML: {error}") from error


def _checked(path: Path, values: dict[str, Any]) -> StudyFile:
    top = StrictTable(values, "", TOP)
    ci_prob = top.number("ci_prob", 0.95)
    if ci_prob is None or not 0 < ci_prob < 1:
        raise top.wrong("ci_prob", "a probability between 0 and 1, both excluded")
    beliefs = _beliefs(top.table("beliefs"))
    return StudyFile(
        path=path,
        data=_data_path(path, top),
        title=top.text("title") if "title" in top else path.stem,
        exposure=top.text("exposure"),
        mediator=top.text("mediator"),
        outcome=top.text("outcome"),
        contrast=top.pair("contrast"),
        moderators=top.texts("moderators"),
        ci_prob=float(ci_prob),
        beliefs=panel() if beliefs is None else beliefs,
        own_beliefs=beliefs is not None,
        claim=_claim(top.table("claim")),
        at=_at(top.table("at")),
        fit=_fit(top.table("fit")),
        coefficients=_coefficients(top.table("coefficients")),
    )


def _data_path(path: Path, top: StrictTable) -> Path:
    given = top.text("data")
    found = path.parent / given
    if found.suffix not in (".csv", ".parquet"):
        raise top.wrong("data", "the path of a .csv or .parquet file, relative to the study file")
    if not found.is_file():
        raise StudyFileError(f"data is {given!r}, but there is no file {str(found)!r}")
    return found


def _beliefs(table: Mapping[str, Any] | None) -> dict[str, Prior] | None:
    if table is None:
        return None
    if not table:
        raise StudyFileError("beliefs is empty; give at least one, or leave it out for the default set")
    for label in table:
        if not label.strip():
            raise StudyFileError(f"beliefs has the label {label!r}; a label must not be blank")
    return {label: from_spec(spec, f"beliefs.{label}") for label, spec in table.items()}


def _claim(values: Mapping[str, Any] | None) -> Claim:
    if values is None:
        return Claim()
    table = StrictTable(values, "claim", CLAIM)
    numbers = {key: table.number(key) for key in ("above", "below", "required") if key in table}
    effect = table.text("effect") if "effect" in table else "indirect"
    return _built(lambda: Claim(effect, **numbers), "claim")  # type: ignore[arg-type]


def _at(values: Mapping[str, Any] | None) -> dict[str, Any] | None:
    if values is None:
        return None
    for name, value in values.items():
        several = value if isinstance(value, list) and value else [value]
        if not all(is_single(each) for each in several):
            raise StudyFileError(
                f"at.{name} is {described(value)}; it must be a number, text or truth value, or a list of them"
            )
    return dict(values)


def _fit(values: Mapping[str, Any] | None) -> FitRequest:
    usual = FitRequest()
    if values is None:
        return usual
    table = StrictTable(values, "fit", FIT)
    counts = {"draws": 4, "tune": 0, "chains": 1}
    return FitRequest(
        method=cast(Literal["nuts", "exact"], table.one_of("method", ("nuts", "exact"), usual.method)),
        random_seed=table.whole("random_seed", None, 0),
        learn=table.truth("learn", usual.learn),
        **{key: table.whole(key, getattr(usual, key), least) or 0 for key, least in counts.items()},
    )


def _coefficients(values: Mapping[str, Any] | None) -> Coefficients | None:
    if values is None:
        return None
    table = StrictTable(values, "coefficients", COEFFICIENTS)
    arguments: dict[str, Any] = {}
    for equation in ("mediator", "outcome"):
        terms = table.table(equation) or {}
        place = f"coefficients.{equation}"
        arguments[equation] = {term: coefficient_from_spec(spec, f"{place}.{term}") for term, spec in terms.items()}
    for scale in ("sigma_mediator", "sigma_outcome"):
        if scale in table:
            arguments[scale] = coefficient_from_spec(table.table(scale) or {}, f"coefficients.{scale}")
    arguments["scale"] = table.one_of("scale", ("identified", "structural"), "identified")
    chosen: Coefficients = _built(lambda: Coefficients(**arguments), "coefficients")
    return chosen


def _built[Value](build: Callable[[], Value], place: str) -> Value:
    try:
        return build()
    except ArgumentError as error:
        # The value's own name stands in front of its message, and the place says it already.
        words = str(error).removeprefix(f"{place.capitalize()}: ")
        raise StudyFileError(f"{place}: {words}") from None
