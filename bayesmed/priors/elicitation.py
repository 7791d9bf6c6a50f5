"""From stated quantiles of ρ to the member of a family that has them."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
from scipy.special import ndtri

from bayesmed.core.errors import PriorError
from bayesmed.priors.arguments import real, refusal
from bayesmed.priors.fisher_normal import FARTHEST, FisherNormal
from bayesmed.priors.prior import Floats, Prior
from bayesmed.priors.stretched_beta import LKJ, StretchedBeta
from bayesmed.priors.truncated_normal import TruncatedNormal
from bayesmed.priors.uniform import Uniform

__all__ = ["from_quantiles", "quantile_gaps"]

FAMILIES = ("StretchedBeta", "TruncatedNormal", "FisherNormal", "Uniform", "LKJ")


def from_quantiles(
    quantiles: Mapping[float, float],
    family: str = "StretchedBeta",
    *,
    tolerance: float = 0.02,
    allow_u_shape: bool = False,
) -> Prior:
    """Return the member of a family that comes nearest to quantiles stated for ρ.

    Parameters
    ----------
    quantiles : mapping of float to float
        Probability to value: ``{0.05: -0.1, 0.95: 0.4}`` puts 90 % between −0.1 and 0.4. Two or more, both
        increasing.
    family : {"StretchedBeta", "TruncatedNormal", "FisherNormal", "Uniform", "LKJ"}
        The family; TruncatedNormal has bounds ±0.99. Two quantiles fix a member of all but the LKJ family;
        more are met as nearly as can be, in the sense of least squares of ρ.
    tolerance : float
        The largest distance allowed between a quantile stated and that of the prior, in units of ρ.
    allow_u_shape : bool
        Whether the density may rise towards −1 or 1, as a beta does with a shape under 1. That is seldom
        meant, and leaves an effect without an SD.

    Raises
    ------
    PriorError
        If the quantiles are not in order, if no member comes within `tolerance` of them all (the message
        gives what the nearest one has), or if the nearest rises towards ±1 and that is not allowed.

    See Also
    --------
    bayesmed.priors.quantile_gaps : what a prior has where something else was stated.

    Examples
    --------
    >>> prior = from_quantiles({0.05: -0.1, 0.95: 0.4})
    >>> prior.ppf([0.05, 0.95]).round(6)
    array([-0.1,  0.4])
    """
    q, x = _checked(quantiles)
    tolerance = real("from_quantiles", "tolerance", tolerance)
    if family not in FAMILIES:
        raise refusal("from_quantiles", "family", family, f"it is one of {', '.join(FAMILIES)}")
    prior = _nearest(family, q, x)
    gaps = quantile_gaps(prior, quantiles)
    worst = max(abs(stated - has) for stated, has in gaps.values())
    if worst > tolerance:
        listed = ", ".join(f"{has:.3f} at {level:g} (stated {stated:g})" for level, (stated, has) in gaps.items())
        raise PriorError(
            f"from_quantiles: no {family} has these quantiles within {tolerance:g}; the nearest, {prior!r},"
            f" has {listed}. State other quantiles, take another family, or allow a larger tolerance"
        )
    if isinstance(prior, StretchedBeta) and min(prior.alpha, prior.beta) < 1 and not allow_u_shape:
        raise PriorError(
            f"from_quantiles: the nearest member is {prior!r}, whose density rises without bound towards"
            f" {_ends(prior)}, which is seldom meant; state quantiles closer together, take another family,"
            " or pass allow_u_shape=True"
        )
    return prior


def quantile_gaps(prior: Prior, quantiles: Mapping[float, float]) -> dict[float, tuple[float, float]]:
    """Return for each probability the value stated and the quantile that `prior` has.

    Examples
    --------
    >>> quantile_gaps(Uniform(0, 0.5), {0.5: 0.2})
    {0.5: (0.2, 0.25)}
    """
    return {float(level): (float(stated), float(prior.ppf(level))) for level, stated in quantiles.items()}


def _checked(quantiles: Any) -> tuple[Floats, Floats]:
    owner = "from_quantiles"
    if not isinstance(quantiles, Mapping) or not quantiles:
        raise refusal(owner, "quantiles", quantiles, "a dict of probability to value is needed")
    pairs = [
        (real(owner, "a probability", level), real(owner, f"the quantile at {level}", value))
        for level, value in quantiles.items()
    ]
    pairs.sort()
    for level, value in pairs:
        if not 0 < level < 1:
            raise refusal(owner, "a probability", level, "it must lie strictly between 0 and 1")
        if not -1 < value < 1:
            raise refusal(owner, f"the quantile at {level:g}", value, "it must lie strictly between -1 and 1")
    for (level, value), (next_level, next_value) in itertools.pairwise(pairs):
        if not value < next_value:
            raise PriorError(
                f"from_quantiles: the quantile at {next_level:g} is {next_value:g}; it must exceed that at"
                f" {level:g}, which is {value:g}"
            )
    return np.array([level for level, _ in pairs]), np.array([value for _, value in pairs])


def _nearest(family: str, q: Floats, x: Floats) -> Prior:
    if family != "LKJ" and q.size < 2:
        raise PriorError(f"from_quantiles: {family} needs two quantiles or more, and there is {q.size}")
    if family == "Uniform":
        slope, start = np.polyfit(q, x, 1)
        if not (start >= -1 - 1e-12 and start + slope <= 1 + 1e-12):
            raise PriorError(
                f"from_quantiles: a Uniform with these quantiles would reach from {start:.3g} to"
                f" {start + slope:.3g}, and a residual correlation lies between -1 and 1"
            )
        return Uniform(max(start, -1.0), min(start + slope, 1.0))
    # a normal on Fisher's scale, through the quantiles, is where the others start
    z = np.arctanh(x)
    sd, mean = np.polyfit(ndtri(q), z, 1) if q.size > 1 else (max(abs(z[0] / ndtri(q[0] + 1e-9)), 0.05), 0.0)
    sd, mean = min(max(float(sd), 1e-4), FARTHEST), float(np.clip(mean, -FARTHEST, FARTHEST))
    if family == "FisherNormal":
        return _least_squares(
            lambda p: FisherNormal(np.clip(p[0], -FARTHEST, FARTHEST), min(math.exp(p[1]), FARTHEST)),
            [mean, math.log(sd)],
            q,
            x,
        )
    centre = math.tanh(mean)
    variance = (sd * (1 - centre**2)) ** 2
    if family == "TruncatedNormal":
        bound = 0.99
        inner = math.atanh(min(max(centre / bound, -0.999), 0.999))
        return _least_squares(
            lambda p: TruncatedNormal(bound * math.tanh(p[0]), math.exp(p[1])),
            [inner, 0.5 * math.log(variance)],
            q,
            x,
        )
    total = max((1 - centre**2) / variance - 1, 0.5)
    if family == "LKJ":
        return _least_squares(lambda p: LKJ(math.exp(p[0])), [math.log(total / 2)], q, x)
    shapes = [math.log(total * (1 + centre) / 2), math.log(total * (1 - centre) / 2)]
    return _least_squares(lambda p: StretchedBeta(*np.exp(p)), shapes, q, x)


def _least_squares(build: Callable[[Floats], Prior], start: list[float], q: Floats, x: Floats) -> Prior:
    from scipy.optimize import least_squares

    def misses(p: Floats) -> Floats:
        return build(p).ppf(q) - x

    limit = 12.0  # on log scales: shapes and SDs from 6e-6 to 160,000
    found = least_squares(
        misses,
        np.clip(start, -limit, limit),
        bounds=(-limit - 1, limit + 1),
        xtol=1e-14,
        ftol=1e-14,
        gtol=1e-14,
        x_scale=1.0,
    )
    return build(found.x)


def _ends(prior: StretchedBeta) -> str:
    ends = [end for end, shape in (("-1", prior.alpha), ("1", prior.beta)) if shape < 1]
    return " and ".join(ends)
