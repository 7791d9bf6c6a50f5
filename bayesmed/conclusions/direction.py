"""In which direction the exposure moves the mediator: what "inflates the effect" turns on."""

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.fit.result import FitResult
from bayesmed.study.points import points


def direction(result: FitResult) -> Array:
    """Return the sign of B per draw, averaged over all rows; shape (draw,)."""
    return np.asarray(np.sign(result.contrasts(points(result.observed, {})).b[0]))
