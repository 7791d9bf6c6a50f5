"""What bayesmed raises and warns: each error is of the package's own type and subclasses a builtin."""

import warnings
from pathlib import Path

HERE = str(Path(__file__).parents[1])


class BayesmedError(Exception):
    """Base of every error that bayesmed raises on purpose."""


class DataError(BayesmedError, ValueError):
    """The data frame cannot be used as it stands: a column, its type or its values."""


class FormulaError(BayesmedError, ValueError):
    """A formula cannot be read, names what is not there, or is not allowed."""


class DesignError(BayesmedError, ValueError):
    """The rows and formulas together do not determine the model, for example by rank deficiency."""


class ArgumentError(BayesmedError, ValueError):
    """An argument of a call has a value that is not allowed."""


class PriorError(ArgumentError):
    """A belief about the residual correlation cannot be what was asked."""


class BeliefNeededError(ArgumentError):
    """A conclusion needs a belief about the residual correlation and none was given."""


class StudyFileError(BayesmedError, ValueError):
    """A study file has a key, a value or a path that is not allowed."""


class FitError(BayesmedError, RuntimeError):
    """Sampling cannot be done as asked, or draws cannot be used."""


class BayesmedWarning(UserWarning):
    """Base of every warning that bayesmed gives: each one is something for the user to decide."""


class InformedWarning(BayesmedWarning):
    """The model lets the data inform the residual correlation; the terms that do are named."""


class SamplingWarning(BayesmedWarning):
    """A sampling diagnostic is outside its bound."""


class DataWarning(BayesmedWarning):
    """Something in the rows deserves a decision, such as identifiers that repeat."""


class ExtrapolationWarning(BayesmedWarning):
    """A conclusion is asked at a moderator value outside those observed."""


def warn(warning: Warning) -> None:
    """Give a warning that points at the line of the user's that led to it, however deep in the package it arose."""
    warnings.warn(warning, skip_file_prefixes=(HERE,))
