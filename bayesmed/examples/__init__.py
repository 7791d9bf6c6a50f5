"""Invented data sets, each with its study file and the script that makes it."""

from pathlib import Path
from typing import TYPE_CHECKING

from bayesmed.core.errors import ArgumentError

if TYPE_CHECKING:
    import pandas as pd

_HERE = Path(__file__).resolve().parent


def example_names() -> tuple[str, ...]:
    """Return the names that :func:`load_example` knows."""
    return tuple(sorted(path.parent.name for path in _HERE.glob("*/study.toml")))


def load_example(name: str) -> "pd.DataFrame":
    """Return an invented data set.

    Parameters
    ----------
    name : str
        "knee_rehab": 240 invented patients after knee surgery, coached by text message or not. What is
        true of them stands in ``bayesmed/examples/knee_rehab/make.py``. "tutoring": 450 invented pupils in three
        kinds of school, given hours of tutoring by lottery; see ``bayesmed/examples/tutoring/make.py``.

    Returns
    -------
    pandas.DataFrame
        One row per participant, missing values included.

    Raises
    ------
    ArgumentError
        If there is no such example; it lists those there are.

    Examples
    --------
    >>> load_example("knee_rehab").shape
    (240, 7)
    """
    import pandas as pd

    return pd.read_csv(example_study_file(name).with_name(f"{name}.csv"))


def example_study_file(name: str) -> Path:
    """Return the path of an example's study file, which names its data; errors as in :func:`load_example`."""
    if name not in example_names():
        raise ArgumentError(f"example {name!r} does not exist; there is {', '.join(example_names())}")
    return _HERE / name / "study.toml"
