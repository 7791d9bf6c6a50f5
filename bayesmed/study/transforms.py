"""The closed list of functions a formula may call, and the options each of them takes."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy as np
from formulaic import transforms as spline
from formulaic.transforms import contrasts
from formulaic.transforms.patsy_compat import standardize

MOST_COLUMNS = 50
"""The largest ``df`` or ``degree``: a formula from a stranger must not be able to fill the memory."""


@dataclass(frozen=True)
class Option:
    """What the value of one option may be.

    Attributes
    ----------
    kind : str
        "count", "number", "numbers", "truth", "truth or number", "word", "value", "values" or "contrast".
    words : tuple of str
        The strings allowed where `kind` is "word".
    """

    kind: str
    words: tuple[str, ...] = ()


@dataclass(frozen=True)
class Transform:
    """One function that formulas may call.

    Attributes
    ----------
    function : callable
        What is evaluated.
    expressions : int
        How many leading arguments are expressions of columns; all others are options.
    options : mapping of str to Option
        In the order in which they may also be given without their names.
    several_columns : bool
        True if the result is categorical or has more than one column, so that it must stand alone.
    """

    function: Callable[..., Any]
    expressions: int = 1
    options: Mapping[str, Option] = field(default_factory=dict)
    several_columns: bool = False


_SPLINE_BOUNDS = {"lower_bound": Option("number"), "upper_bound": Option("number")}
_BEYOND = Option("word", ("raise", "clip", "zero", "extend"))
_CUBIC = {
    "df": Option("count"),
    "knots": Option("numbers"),
    **_SPLINE_BOUNDS,
    "constraints": Option("word", ("center",)),
    "extrapolation": _BEYOND,
}


def _itself(x: Any) -> Any:
    return x


TRANSFORMS: Mapping[str, Transform] = MappingProxyType(
    {
        "I": Transform(_itself),
        "C": Transform(
            contrasts.C,
            options={"contrasts": Option("contrast"), "levels": Option("values")},
            several_columns=True,
        ),
        "center": Transform(spline.center),
        "scale": Transform(
            spline.scale,
            options={
                "center": Option("truth or number"),
                "scale": Option("truth or number"),
                "ddof": Option("count"),
            },
        ),
        "standardize": Transform(
            standardize,
            options={
                "center": Option("truth or number"),
                "rescale": Option("truth or number"),
                "ddof": Option("count"),
            },
        ),
        "poly": Transform(
            spline.poly, options={"degree": Option("count"), "raw": Option("truth")}, several_columns=True
        ),
        "bs": Transform(
            spline.basis_spline,
            options={
                "df": Option("count"),
                "knots": Option("numbers"),
                "degree": Option("count"),
                "include_intercept": Option("truth"),
                **_SPLINE_BOUNDS,
                "extrapolation": _BEYOND,
            },
            several_columns=True,
        ),
        "cr": Transform(spline.natural_cubic_spline, options=_CUBIC, several_columns=True),
        "cs": Transform(spline.natural_cubic_spline, options=_CUBIC, several_columns=True),
        "cc": Transform(spline.cyclic_cubic_spline, options=_CUBIC, several_columns=True),
        "log": Transform(np.log),
        "log2": Transform(np.log2),
        "log10": Transform(np.log10),
        "log1p": Transform(np.log1p),
        "exp": Transform(np.exp),
        "expm1": Transform(np.expm1),
        "sqrt": Transform(np.sqrt),
        "abs": Transform(np.abs),
        "sin": Transform(np.sin),
        "cos": Transform(np.cos),
        "tanh": Transform(np.tanh),
        "minimum": Transform(np.minimum, expressions=2),
        "maximum": Transform(np.maximum, expressions=2),
    }
)
"""Every function a formula may call, by name."""

CONTRASTS: Mapping[str, Transform] = MappingProxyType(
    {
        "contr.treatment": Transform(contrasts.TreatmentContrasts, 0, {"base": Option("value")}),
        "contr.SAS": Transform(contrasts.SASContrasts, 0, {"base": Option("value")}),
        "contr.sum": Transform(contrasts.SumContrasts, 0),
        "contr.helmert": Transform(
            contrasts.HelmertContrasts, 0, {"reverse": Option("truth"), "scale": Option("truth")}
        ),
        "contr.poly": Transform(contrasts.PolyContrasts, 0, {"scores": Option("numbers")}),
        "contr.diff": Transform(contrasts.DiffContrasts, 0, {"backward": Option("truth")}),
    }
)
"""Every way to code a categorical inside ``C(…)``, by name."""


def allowed_names() -> str:
    """Return the allowed functions as the text that errors show."""
    return ", ".join(sorted(TRANSFORMS, key=str.lower)) + " (codings inside C(): " + ", ".join(CONTRASTS) + ")"


def as_number(x: Any) -> Any:
    """Return the truth values `x` as 0 and 1, so that sums of comparisons count instead of meaning "or"."""
    return np.asarray(x, dtype=float)


def both(x: Any, y: Any) -> Any:
    """Return where both `x` and `y` are true."""
    return _truth(x) & _truth(y)


def either(x: Any, y: Any) -> Any:
    """Return where `x` or `y` is true."""
    return _truth(x) | _truth(y)


def opposite(x: Any) -> Any:
    """Return where `x` is not true."""
    return ~_truth(x)


def _truth(x: Any) -> Any:
    values = np.asarray(x)
    if values.dtype == bool:
        return values
    if values.dtype.kind == "f" and np.all((values == 0) | (values == 1)):
        return values == 1
    raise TypeError("&, | and ~ take comparisons and 0/1 columns only")
