"""The default set of beliefs for a comparison."""

from __future__ import annotations

from bayesmed.priors.fisher_normal import FisherNormal
from bayesmed.priors.point import PointMass
from bayesmed.priors.prior import Prior
from bayesmed.priors.stretched_beta import LKJ
from bayesmed.priors.truncated_normal import TruncatedNormal
from bayesmed.priors.uniform import Uniform

__all__ = ["panel"]


def panel() -> dict[str, Prior]:
    """Return the documented default set of beliefs about ρ, a new dict of label to prior.

    It spans what readers of one analysis may reasonably believe, and under each member the effect has a mean
    and an SD. The choice is this package's own; replace it wherever the subject matter says more.

    - ``"nothing left out"``, ``PointMass(0)``: what an analysis without a sensitivity analysis assumes.
    - ``"slight, either sign"``, ``FisherNormal(0, 0.1)``: for a study that measured the causes it knew of.
      95 % of it is within ±0.19: a cause that explains 19 % of what is left in the mediator and of what is
      left in the outcome would sit at its edge.
    - ``"moderate, positive"``, ``TruncatedNormal(0.25, 0.15)``: most common causes (health, motivation,
      means) push the mediator and the outcome the same way when both are scored so that more is better.
      Centred on a cause that explains a quarter of what is left in each; 95 % of it is positive.
    - ``"moderate, negative"``, its mirror image ``TruncatedNormal(-0.25, 0.15)``: for scores that run
      opposite ways, and so that the set itself takes no side.
    - ``"wide"``, ``LKJ(2)``: doubt about size and sign, with correlations near ±1 the least likely.
    - ``"anything to ±0.9"``, ``Uniform(-0.9, 0.9)``: every ρ in the range over which it is commonly swept
      (common practice, no source) equally likely.

    Examples
    --------
    >>> panel()["wide"]
    LKJ(eta=2.0)
    """
    return {
        "nothing left out": PointMass(0.0),
        "slight, either sign": FisherNormal(0.0, 0.1),
        "moderate, positive": TruncatedNormal(0.25, 0.15),
        "moderate, negative": TruncatedNormal(-0.25, 0.15),
        "wide": LKJ(2.0),
        "anything to ±0.9": Uniform(-0.9, 0.9),
    }
