"""An affine PyMC transform: coefficients to coordinates in which their posterior is about round."""

from typing import Any

import numpy as np
import pytensor.tensor as pt
from pymc.logprob.transforms import Transform

from bayesmed.core.mapping import Array


class Whitened(Transform):  # type: ignore[misc]
    """``whiten (theta - centre)``, with `whiten` upper triangular and `unwhiten` its inverse."""

    name = "whitened"

    def __init__(self, centre: Array, whiten: Array, unwhiten: Array) -> None:
        self.centre = centre
        self.whiten = whiten
        self.unwhiten = unwhiten
        self.log_volume = -float(np.log(np.abs(np.diag(whiten))).sum())

    def forward(self, value: Any, *inputs: Any) -> Any:
        """Return coordinates from coefficients."""
        return pt.dot(self.whiten, value - self.centre)

    def backward(self, value: Any, *inputs: Any) -> Any:
        """Return coefficients from coordinates."""
        return self.centre + pt.dot(self.unwhiten, value)

    def log_jac_det(self, value: Any, *inputs: Any) -> Any:
        """Return the constant log determinant of the backward map, one for the whole vector."""
        return pt.as_tensor(self.log_volume)
