"""One sentence on a belief, and the probability that confounding inflates the effect."""

import numpy as np
import pytest

from bayesmed.core.errors import PriorError
from bayesmed.priors import LKJ, HasDirection, Mixture, PointMass, SharedCause, TruncatedNormal, Uniform
from bayesmed.priors.description import inflation_probability


class Draws:
    def __init__(self, values):
        self._values = np.array(values, dtype=float)

    def direction(self):
        return self._values


def test_sentence():
    assert TruncatedNormal(0.25, 0.15).describe() == (
        "TruncatedNormal(mean=0.25, sd=0.15, lower=-0.99, upper=0.99): rho is between 0.00 and 0.50 with 90 %"
        " probability, ends that one unmeasured cause would give by explaining 0.3 % (moving them the same"
        " way) and 50 % (moving them the same way) of the residual variance of mediator and outcome alike;"
        " an effect has a mean and an SD under it."
    )


@pytest.mark.parametrize(
    ("prior", "parts"),
    [
        (PointMass(0), ["rho is 0.00 with 90 % probability or more, as if nothing was left out"]),
        (PointMass(-0.3), ["rho is -0.30", "explains 30 % (moving them opposite ways) of the residual"]),
        (Mixture([0, LKJ(2)], [99, 1]), ["as if nothing was left out"]),
        (Uniform(-1, 1), ["between -0.90 and 0.90", "has a mean but no finite SD under it"]),
        (LKJ(0.3), ["-0.99 or beyond and 0.99 or beyond", "over 99 %", "neither a finite mean nor an SD"]),
        (SharedCause(0.16, 0.25, positive=0.5), ["between -0.20 and 0.20", "20 % (moving them opposite ways)"]),
    ],
    ids=repr,
)
def test_what_the_sentence_says(prior, parts):
    sentence = prior.describe()
    for part in parts:
        assert part in sentence
    assert sentence.endswith(".")
    assert "\n" not in sentence
    assert "inflates" not in sentence


def test_equal_strength_share_gives_back_rho():
    for rho in (-0.4, 0.25):
        prior = SharedCause(abs(rho), abs(rho), positive=float(rho > 0))
        assert prior.rho_mean() == pytest.approx(rho)


def test_inflation_needs_the_direction_of_the_exposures_effect():
    prior = Uniform(-0.1, 0.3)  # ρ > 0 with probability 3/4
    fit: HasDirection = Draws([2.0, 0.1, 5.0, -1.0])
    assert inflation_probability(prior, fit) == pytest.approx((3 * 0.75 + 0.25) / 4)
    assert "confounding inflates the indirect effect with probability 0.625." in prior.describe(fit)
    assert inflation_probability(PointMass(0), fit) == 0
    assert ">0.999" in Uniform(0.1, 0.2).describe(Draws([1, 1]))
    assert "probability 0.000" in Uniform(0.1, 0.2).describe(Draws([-1, -1]))
    with pytest.raises(PriorError, match=r"direction\(\) is empty or has NaN"):
        prior.describe(Draws([1, np.nan]))


def test_inflation_is_that_of_the_formula():
    """indirect(ρ) = A − κ r B: what regression shows, A, exceeds the effect exactly if r and B have one"
    " sign."""
    rng = np.random.default_rng(3)
    b, rho = rng.normal(0.3, 0.5, 100_000), Uniform(-0.1, 0.3).draw(100_000, random_seed=4)
    odds = rho / np.sqrt(1 - rho**2)
    inflated = (1.0 - 0.8 * odds * b) < 1.0
    assert inflation_probability(Uniform(-0.1, 0.3), Draws(b)) == pytest.approx(inflated.mean(), abs=0.01)
