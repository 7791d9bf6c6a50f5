"""Sets of beliefs: what they refuse, what their extreme members are, and how far E[r] goes over them."""

import copy
import math
import pickle
import re

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.special import betainc, expit, log_ndtr

from bayesmed.core.errors import PriorError
from bayesmed.core.mapping import odds
from bayesmed.core.steps import Steps, claim_steps
from bayesmed.priors import LKJ, FisherNormal, Mixture, PointMass, StretchedBeta, TruncatedNormal, Uniform
from bayesmed.priors.prior_set import as_set
from bayesmed.priors.reweighted import Reweighted
from bayesmed.priors.sets import AnyOn, Contaminated, UnimodalAt
from bayesmed.priors.sets_nearby import Nearby
from bayesmed.priors.sets_statements import Mean, Probability, Quantile, Statements

WITHIN = "a residual correlation lies between -1 and 1"
REFUSED = [
    (lambda: AnyOn(-1.2, 0), f"AnyOn: lower is -1.2; {WITHIN}"),
    (lambda: AnyOn(0.3, 0.1), "AnyOn: lower is 0.3; it must not exceed upper, which is 0.1"),
    (lambda: AnyOn(1, 1), "AnyOn: lower is 1.0; no correlation is ±1, and upper is the same"),
    (lambda: AnyOn("a", 1), f"AnyOn: lower is 'a'; {WITHIN}"),
    (lambda: Contaminated(LKJ(2), 1.2), "Contaminated: epsilon is 1.2; it is a share of doubt, from 0 to 1"),
    (lambda: Contaminated(LKJ(2), None), "Contaminated: epsilon is None; it is a share of doubt, from 0 to 1"),
    (lambda: Contaminated(1.5, 0.1), f"PointMass: value is 1.5; {WITHIN}"),
    (lambda: UnimodalAt(0.5, -0.3, 0.3), "UnimodalAt: mode is 0.5; it must lie between the bounds -0.3 and 0.3"),
    (lambda: UnimodalAt(1, 0, 1), "UnimodalAt: mode is 1.0; it must lie strictly between -1 and 1"),
    (lambda: Nearby(LKJ(2), -0.1), "Nearby: divergence is -0.1; a divergence is a finite number, 0 or more"),
    (lambda: Nearby(LKJ(2), math.inf), "Nearby: divergence is inf; a divergence is a finite number, 0 or more"),
    (lambda: Probability(at_most=0.1), "Probability: neither above nor below is given; give the end or ends"),
    (lambda: Probability(above=0.3), "Probability: no probability given; give exactly, or at_least, at_most or both"),
    (lambda: Probability(above=0, exactly=0.7, at_most=0.8), "Probability: exactly, at_most given; give exactly, or"),
    (lambda: Probability(above=0.3, below=0.1, exactly=1), "above is 0.3; it must be less than below, which is 0.1"),
    (lambda: Probability(above=0.3, at_most=1.1), "Probability: at_most is 1.1; a probability lies between 0 and 1"),
    (lambda: Probability(above=0, at_least=0.6, at_most=0.5), "at_least is 0.6; it exceeds at_most, which is 0.5"),
    (lambda: Mean(0.2, 0.1), "Mean: lower is 0.2; it must not exceed upper, which is 0.1"),
    (lambda: Quantile(50, 0.1), "Quantile: probability is 50.0; a probability lies between 0 and 1"),
    (lambda: Statements(0.3), "Statements: statements[0] is 0.3; a statement is needed, such as Probability(above=0.3"),
    (lambda: Statements(Mean(0.5), lower=-0.3, upper=0.3), "no belief on [-0.3, 0.3] has: the mean of rho is 0.5"),
    (lambda: as_set(LKJ(2)), "from LKJ(eta=2.0) (that is a single prior: fit.compare gives its probability)"),
    (lambda: as_set("any"), "a set of priors cannot be made from 'any'; give AnyOn(-0.3, 0.3), Statements(…)"),
]


@pytest.mark.parametrize(("make", "message"), REFUSED, ids=lambda value: value if isinstance(value, str) else "")
def test_refusals_name_argument_value_and_what_is_allowed(make, message):
    with pytest.raises(PriorError, match=re.escape(message)):
        make()


def test_statements_that_contradict_each_other_are_named_and_the_others_are_not():
    with pytest.raises(PriorError) as caught:
        Statements(
            Mean(-0.5, 0.5),
            Probability(above=0.3, at_least=0.4),
            Quantile(0.5, 0.0, 0.1),
            Quantile(0.7, -0.2, 0.2),
            lower=-0.9,
            upper=0.9,
        )
    message = str(caught.value)
    assert "P(rho > 0.3) >= 0.4; the 0.7 quantile of rho is between -0.2 and 0.2" in message
    assert "Leave out or loosen one of these" in message
    assert "mean" not in message
    assert "0.5 quantile" not in message


SETS = [
    AnyOn(-0.3, 0.5),
    AnyOn(0.2, 0.2),
    AnyOn(-1, 1),
    Contaminated(TruncatedNormal(0.2, 0.2), 0.1, -0.6, 0.7),
    Contaminated(0.1, 0.3, -0.5, 0.5),
    UnimodalAt(0.1, -0.5, 0.8),
    UnimodalAt(0.0, -1, 1),
    Nearby(TruncatedNormal(0.2, 0.2, -0.9, 0.9), 0.1),
    Nearby(Mixture([0.0, Uniform(-0.5, 0.6)], [0.4, 0.6]), 0.2),
    Nearby(FisherNormal(0.1, 0.2), 0.02),
    Statements(Probability(above=0.3, at_most=0.1), Probability(above=0, exactly=0.7), lower=-0.9, upper=0.9),
    Statements(Mean(0, 0.2), Quantile(0.1, -0.3, -0.1), Probability(above=-0.1, below=0.1, at_least=0.2)),
    Statements(lower=-0.4, upper=0.4),
]


@pytest.mark.parametrize("members", SETS, ids=repr)
def test_a_set_is_a_frozen_value(members):
    assert eval(repr(members)) == members
    assert pickle.loads(pickle.dumps(members)) == members
    assert hash(members) == hash(copy.deepcopy(members))
    assert as_set(members) is members


@pytest.fixture(scope="module")
def steps():
    random = np.random.default_rng(3)
    return claim_steps(random.normal(0.3, 0.6, 500), random.normal(0.3, 1.0, 500), 0.0, "above")


@pytest.mark.parametrize("members", SETS, ids=repr)
def test_extreme_members_belong_to_the_set_and_lie_in_order(members, steps):
    low, high = members.lowest(steps), members.highest(steps)
    assert average(steps, low) <= average(steps, high) + 1e-12
    lower, upper = members.support()
    for belief in (low, high):
        assert belief.support()[0] >= lower
        assert belief.support()[1] <= upper
        assert belongs(belief, members)
    # No random member goes further.
    random = np.random.default_rng(5)
    for belief in (random_member(members, random) for _ in range(25)):
        if belief is not None:
            assert average(steps, low) - 1e-6 <= average(steps, belief) <= average(steps, high) + 1e-6


def average(steps, belief):
    """E[steps] under a belief, by its probabilities of each piece and each place."""
    before, up_to = belief.below(steps.places), 1 - belief.above(steps.places)
    return float(steps.between @ (np.append(before, 1.0) - np.append(0.0, up_to)) + steps.at @ (up_to - before))


def belongs(belief, members):
    if isinstance(members, Nearby):
        return divergence(belief, members.base) <= members.divergence + 1e-6
    if isinstance(members, Statements):
        return all(meets(belief, statement) for statement in members.statements)
    if isinstance(members, UnimodalAt):
        return members.mode in belief.support()
    if isinstance(members, Contaminated):
        share = dict(zip(belief.priors, belief.weights, strict=True))
        return share[members.base] == pytest.approx(1 - members.epsilon)
    return True


def meets(belief, statement):
    if isinstance(statement, Mean):
        upper = statement.lower if statement.upper is None else statement.upper
        return statement.lower - 1e-7 <= belief.rho_mean() <= upper + 1e-7
    if isinstance(statement, Quantile):
        upper = statement.lower if statement.upper is None else statement.upper
        return belief.below(statement.lower) <= statement.probability + 1e-7 and belief.cdf(upper) >= (
            statement.probability - 1e-7
        )
    above = -1.0 if statement.above is None else statement.above
    below = 1.0 if statement.below is None else statement.below
    share = belief.below(below) - belief.cdf(above)
    least, most = statement._limits()
    return least - 1e-7 <= share <= most + 1e-7


def divergence(belief, base):
    """KL(belief | base) over cells much finer than the steps, which can only understate it, by very little."""
    cuts = np.linspace(-1, 1, 40_001)
    new = np.append(np.diff(belief.cdf(cuts)), [weight for _, weight in belief.atoms()])
    old = np.append(np.diff(base.cdf(cuts)), [weight for _, weight in base.atoms()])
    for masses, prior in ((new, belief), (old, base)):
        for value, weight in prior.atoms():
            masses[np.searchsorted(cuts, value) - 1] -= weight
    kept = new > 1e-14
    return float(new[kept] @ np.log(new[kept] / old[kept]))


def random_member(members, random):
    lower, upper = np.clip(members.support(), -0.999, 0.999)

    def anywhere():
        places = random.uniform(lower, upper, 4)
        return Mixture([PointMass(float(place)) for place in places], random.dirichlet(np.full(4, 0.5)))

    if isinstance(members, AnyOn):
        return anywhere()
    if isinstance(members, Contaminated):
        doubt = PointMass(float(random.uniform(*np.clip([members.lower, members.upper], -0.999, 0.999))))
        return Mixture([members.base, doubt], [1 - members.epsilon, members.epsilon])
    if isinstance(members, UnimodalAt):
        ends = random.uniform(lower, upper, 4)
        parts = [Uniform(min(float(e), members.mode), max(float(e), members.mode)) for e in ends]
        return Mixture([*parts, PointMass(members.mode)], random.dirichlet(np.full(5, 0.5)))
    if isinstance(members, Nearby):
        cuts = np.sort(random.uniform(lower, upper, 5))
        tilted = Reweighted(members.base, cuts, np.ones(6), np.ones(5))
        before, up_to = tilted._masses
        masses = np.append(before, 1.0) - np.append(0.0, up_to)
        factors = np.exp(random.normal(0, 0.5, 6))
        at = factors[:-1]
        total = masses @ factors + (up_to - before) @ at
        found = Reweighted(members.base, cuts, factors / total, at / total)
        return found if divergence(found, members.base) <= members.divergence else None
    found = anywhere()
    return found if all(meets(found, statement) for statement in members.statements) else None


@pytest.mark.parametrize("members", SETS, ids=repr)
def test_no_member_has_odds_outside_the_range(members):
    low, high = members.odds_range()
    assert low <= high
    random = np.random.default_rng(6)
    for belief in (random_member(members, random) for _ in range(25)):
        if belief is not None:
            assert low - 1e-4 <= belief.odds_moments()[0] <= high + 1e-4


@pytest.mark.parametrize(
    ("members", "low", "high"),
    [
        (AnyOn(-0.6, 0.8), -0.75, 4 / 3),
        (AnyOn(-1, 0.8), -math.inf, 4 / 3),
        (Contaminated(Uniform(-0.2, 0.2), 0.1, -0.6, 0.8), -0.075, 0.4 / 3),
        (Contaminated(Uniform(-0.2, 0.2), 0.1), -math.inf, math.inf),
        (Contaminated(LKJ(2), 0.0), 0.0, 0.0),
        (Contaminated(StretchedBeta(0.4, 3), 0.0, -0.5, 0.5), -math.inf, -math.inf),
        (UnimodalAt(0.0, -1, 1), -1.0, 1.0),
        (Nearby(LKJ(2), 0.0), 0.0, 0.0),
        (Nearby(LKJ(30), 0.01), -math.inf, math.inf),
        (Nearby(FisherNormal(0.1, 0.1), 0.01), -math.inf, math.inf),
        (Statements(Probability(above=0.3, at_most=0.1)), -math.inf, math.inf),
        (Statements(Probability(above=0.6, exactly=0), Probability(below=-0.6, exactly=0)), -0.75, 0.75),
    ],
    ids=repr,
)
def test_odds_over_a_set(members, low, high):
    assert members.odds_range() == pytest.approx((low, high), abs=1e-6)


def test_a_base_without_a_mean_leaves_none():
    assert np.isnan(Contaminated(LKJ(0.4), 0.1, -0.5, 0.5).odds_range()).all()


def test_unimodal_beliefs_that_reach_one_have_a_bounded_mean():
    """Any mixture of uniform beliefs from the mode has E[r] between those of the widest two."""
    low, high = UnimodalAt(0.2, -1, 1).odds_range()
    for end in (0.9, 0.99, 0.9999, 1.0):
        assert Uniform(0.2, end).odds_moments()[0] <= high
        assert Uniform(-end, 0.2).odds_moments()[0] >= low
    assert high == pytest.approx(quad(lambda phi: math.sin(phi) / 0.8, math.asin(0.2), math.pi / 2)[0])


def test_the_mean_over_a_ball_follows_the_normal_rule():
    """KL between normals of one SD s is d²/(2s²): the largest mean shift within delta is s√(2 delta)."""
    for delta in (0.005, 0.02):
        low, high = Nearby(TruncatedNormal(0.0, 0.02), delta).odds_range()
        assert (low, high) == pytest.approx((-0.02 * math.sqrt(2 * delta), 0.02 * math.sqrt(2 * delta)), rel=2e-3)


REACHING = [
    (LKJ(3), lambda t: math.log(betainc(3, 3, expit(-2 * t)))),
    (StretchedBeta(9, 5), lambda t: math.log(betainc(5, 9, expit(-2 * t)))),
    (FisherNormal(0.1, 0.3), lambda t: log_ndtr(-(t - 0.1) / 0.3)),
    (TruncatedNormal(0, 0.3, -1, 1), lambda t: math.log(TruncatedNormal(0, 0.3, -1, 1).pdf(0.999999) * 2) - 2 * t),
]


@pytest.mark.parametrize(("base", "log_tail"), REACHING, ids=lambda value: getattr(type(value), "__name__", ""))
def test_the_mean_over_a_ball_is_infinite_where_the_base_reaches_one(base, log_tail):
    """Members that move a little mass ever nearer to 1 stay in the ball, and what it adds to E[r] has no bound."""
    allowed, added = 0.01, []
    for t in (4.0, 10.0, 14.0, 17.0, 20.0):
        # The divergence of a base that gives mass m to rho > tanh t, and keeps its shape on either side.
        def cost(mass, t=t):
            return mass * (math.log(mass) - log_tail(t)) + (1 - mass) * math.log1p(-mass)

        mass = brentq(lambda m: cost(m) - allowed, 1e-12, 0.5)
        added.append(mass * math.sinh(t))
    assert np.all(np.diff(added) > 0)
    assert added[-1] > 1000
    low, high = Nearby(base, allowed).odds_range()
    assert (low, high) == (-math.inf, math.inf)


def test_a_ball_about_an_atom_is_the_atom(steps):
    found = Nearby(0.2, 0.5).lowest(steps)
    assert found.rho_mean() == pytest.approx(0.2)
    assert found.rho_sd() == 0
    assert average(steps, found) == float(steps.value(0.2))
    assert Nearby(0.2, 0.5).odds_range() == pytest.approx((odds(0.2), odds(0.2)))


REWEIGHTED = [
    (Uniform(-0.6, 0.8), [-0.2, 0.1], [0.5, 2.0, 1.0]),
    (LKJ(2), [0.3], [1.0, 0.0]),
    (Mixture([0.0, Uniform(-0.5, 0.6)], [0.4, 0.6]), [0.0, 0.3], [1.0, 2.0, 0.5]),
    (FisherNormal(0.2, 0.3), [], [1.0]),
]


@pytest.mark.parametrize(("base", "places", "factors"), REWEIGHTED, ids=repr)
def test_a_reweighted_belief_is_a_belief(base, places, factors):
    places, factors = np.array(places, dtype=float), np.array(factors)
    at = np.maximum(factors[:-1], factors[1:])
    before, up_to = base.below(places), 1 - base.above(places)
    total = factors @ (np.append(before, 1.0) - np.append(0.0, up_to)) + at @ (up_to - before)
    found = Reweighted(base, places, factors / total, at / total)
    draws = base.draw(400_000, random_seed=2)
    on_place = np.isin(draws, places)
    index = np.searchsorted(places, draws)
    weights = np.append(factors, 0.0)[index]
    weights[on_place] = at[np.clip(index[on_place], 0, max(places.size - 1, 0))] if places.size else 0
    weights /= weights.sum()
    grid = np.concatenate([np.linspace(-0.95, 0.95, 41), places])
    brute = np.array([weights[draws <= x].sum() for x in grid])
    np.testing.assert_allclose(found.cdf(grid), brute, atol=4e-3)
    np.testing.assert_allclose(found.below(grid), [weights[draws < x].sum() for x in grid], atol=4e-3)
    np.testing.assert_allclose(found.above(grid), 1 - found.cdf(grid), atol=1e-12)
    assert found.rho_mean() == pytest.approx(weights @ draws, abs=4e-3)
    assert found.rho_sd() == pytest.approx(math.sqrt(weights @ draws**2 - (weights @ draws) ** 2), abs=4e-3)
    assert found.odds_moments()[0] == pytest.approx(weights @ odds(draws), abs=8e-3)
    q = np.linspace(0.01, 0.99, 25)
    x = found.ppf(q)
    assert np.all(found.cdf(x) >= q - 1e-9)
    assert np.all(found.below(x) <= q + 1e-9)
    inside = (found.cdf(grid) > 0) & (found.cdf(grid) < 1)
    numeric = (found.cdf(grid + 1e-6) - found.cdf(grid - 1e-6)) / 2e-6
    clear = inside & ~np.isin(grid, places) & ~np.isin(grid, [value for value, _ in base.atoms()])
    np.testing.assert_allclose(found.pdf(grid[clear]), numeric[clear], rtol=1e-4, atol=1e-4)


def test_infinite_moments_of_a_base_stay_infinite_when_reweighted():
    found = Nearby(LKJ(0.8), 0.1).lowest(Steps(np.array([0.2]), np.array([0.0, 1.0]), np.array([0.0])))
    assert math.isfinite(found.odds_moments()[0])
    assert found.odds_moments()[1] == math.inf
    assert found.support() == (-1.0, 1.0)
