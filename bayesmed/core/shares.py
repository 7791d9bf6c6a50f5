"""Shares of residual variance that one common cause explains, and the correlation that they leave.

A cause U, independent of exposure, moderators and covariates, that explains the share ``R²_M`` of the mediator's and
``R²_Y`` of the outcome's structural residual variance leaves ``|rho| = sqrt(R²_M R²_Y)``. A regression of the outcome
on U that also holds the mediator shows another share, ``R²_{Y~U|M} = R²_Y (1 - R²_M) / (1 - R²_M R²_Y)``, which is
the one that partial-R² formulas of omitted-variable bias use (Cinelli & Hazlett 2020, doi:10.1111/rssb.12348).
"""

import numpy as np

from bayesmed.core.mapping import Array


def share_needed(rho: Array, r2_mediator: Array) -> Array:
    """Return the share of the outcome's structural residual variance that leaves `rho`; above 1 where none does."""
    return np.asarray(rho**2 / r2_mediator)


def share_given_mediator(r2_outcome: Array, r2_mediator: Array) -> Array:
    """Return what a structural share of the outcome's variance looks like once the mediator is held fixed."""
    return np.asarray(r2_outcome * (1 - r2_mediator) / (1 - r2_mediator * r2_outcome))
