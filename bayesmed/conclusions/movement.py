"""How far rho moved from prior to posterior, and what moved it."""

from dataclasses import dataclass

import numpy as np

from bayesmed.conclusions.accuracy import mean_with_error
from bayesmed.core.errors import BeliefNeededError
from bayesmed.fit.grouped import refuse_grouped
from bayesmed.fit.informants import data_informants, prior_informants
from bayesmed.fit.result import FitResult


@dataclass(frozen=True)
class Movement:
    """Prior and posterior of rho side by side.

    Attributes
    ----------
    prior_mean, prior_sd, posterior_mean, posterior_sd : float
    distance : float
        Largest difference between the prior's and the posterior's distribution functions (Kolmogorov distance), from
        0, not moved, to 1.
    mcse : float
        Monte Carlo error of that difference at the place where it is largest; a distance of under three such errors
        is what draws alone produce.
    where : float
        The rho at which the difference is largest.
    because : str
        What informs rho: data, through an exclusion or functional form; a coefficient prior read through the
        identified data; both; or neither.
    """

    prior_mean: float
    prior_sd: float
    posterior_mean: float
    posterior_sd: float
    distance: float
    mcse: float
    where: float
    because: str

    def __str__(self) -> str:
        return (
            f"rho: mean {self.prior_mean:.3f} → {self.posterior_mean:.3f}, SD {self.prior_sd:.3f} → "
            f"{self.posterior_sd:.3f}; distance {self.distance:.3f} (Monte Carlo error {self.mcse:.3f}). {self.because}"
        )

    def _repr_html_(self) -> str:
        from html import escape

        return f"<div><p>{escape(str(self))}</p></div>"


def movement(result: FitResult) -> Movement:
    """Return how far rho moved, and why; see ``Fit.movement``."""
    refuse_grouped(result, "movement")
    belief = result.belief
    if belief is None:
        raise BeliefNeededError("this fit has no belief about rho, so nothing can have moved; use fit.under(prior)")
    mean, sd = belief.rho_mean(), belief.rho_sd()
    if not result.joint:
        because = "Neither the data nor a coefficient prior informs rho: its posterior is its prior, exactly."
        return Movement(mean, sd, mean, sd, 0.0, 0.0, mean, because)
    rho = result.flat("rho")
    if np.ptp(rho) == 0:
        return Movement(mean, sd, mean, sd, 0.0, 0.0, mean, "A single value of rho cannot move.")
    distance, where = _largest_difference(np.sort(rho), belief)
    _, error = mean_with_error((rho <= where).astype(float)[None], result)
    return Movement(mean, sd, float(rho.mean()), float(rho.std()), distance, float(error[0]), where, _because(result))


def _largest_difference(ordered: np.ndarray, belief: object) -> tuple[float, float]:
    prior = np.asarray(belief.cdf(ordered))  # type: ignore[attr-defined]
    count = len(ordered)
    # The empirical distribution function jumps at each draw: both sides of the jump count.
    below, upto = np.arange(count) / count, np.arange(1, count + 1) / count
    gaps = np.maximum(np.abs(prior - below), np.abs(prior - upto))
    place = int(np.argmax(gaps))
    return float(gaps[place]), float(ordered[place])


def _because(result: FitResult) -> str:
    if not result.settings.learn:
        return "It was held at its prior (learn=False), whatever would have informed it."
    if result.settings.method == "adopted":
        return "The model was extended by the user, and may inform rho in any way."
    data = data_informants(result.observed, result.statistics)
    prior = prior_informants(result.coefficients)
    if data and prior:
        return f"Both inform it: the data through {data}, and {prior}, read through what the data identify."
    if data:
        return f"The data inform it, through {data}."
    verb = "inform" if prior.startswith("the structural priors") else "informs"
    return f"The data are silent on it; {prior} {verb} it, read through what the data identify."
