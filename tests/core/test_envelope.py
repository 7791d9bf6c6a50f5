"""Step functions of rho and their extremes over sets of distributions, against brute force and known inequalities."""

import numpy as np
import pytest
from scipy.optimize import linprog, minimize_scalar

from bayesmed.core.envelope import smallest_average_from, smallest_value, tilt
from bayesmed.core.mapping import odds
from bayesmed.core.programme import Bound, conflict, mirrored, smallest_odds, smallest_under
from bayesmed.core.steps import Steps, claim_steps, holds_throughout
from bayesmed.core.tipping import claim_probability
from bayesmed.priors import LKJ, Mixture, PointMass, Uniform


def lines(draws=300, seed=2):
    """Lines whose slopes have both signs, one in ten flat."""
    random = np.random.default_rng(seed)
    slope = random.normal(0.4, 1.0, draws)
    slope[::10] = 0
    return random.normal(0.3, 0.6, draws), slope


def one_step(place, after=1.0):
    """0 up to `place`, and then `after`."""
    return Steps(np.array([place]), np.array([0.0, after]), np.array([0.0]))


CASES = [(limit, direction) for limit in (0.0, 0.5) for direction in ("above", "below")]


@pytest.mark.parametrize(("limit", "direction"), CASES)
def test_steps_are_the_claim_at_every_rho(limit, direction):
    constant, slope = lines()
    steps = claim_steps(constant, slope, limit, direction)
    assert np.any(np.diff(steps.between) > 0)
    assert np.any(np.diff(steps.between) < 0)
    middles = (np.append(steps.places, 1.0) + np.append(-1.0, steps.places)) / 2
    for rho in (*middles, *np.linspace(-0.999, 0.999, 101)):
        effect = constant - slope * odds(rho)
        held = (effect > limit if direction == "above" else effect < limit).mean()
        assert steps.value(rho) == pytest.approx(held, abs=1e-12)
    # On a step the draw that tips there meets neither the claim nor its opposite.
    opposite = claim_steps(constant, slope, limit, "below" if direction == "above" else "above")
    assert steps.at + opposite.value(steps.places) == pytest.approx(1 - 1 / 300, abs=1e-12)


def test_steps_average_to_the_probability_under_a_belief():
    constant, slope = lines()
    steps = claim_steps(constant, slope, 0.2, "above")
    for belief in (LKJ(2), Uniform(-0.4, 0.7), PointMass(float(steps.places[7]))):
        before, up_to = belief.below(steps.places), 1 - belief.above(steps.places)
        between = np.append(before, 1.0) - np.append(0.0, up_to)
        average = steps.between @ between + steps.at @ (up_to - before)
        assert average == pytest.approx(claim_probability(constant, slope, 0.2, "above", belief).mean(), abs=1e-12)


def test_draws_that_tip_together_make_one_step():
    steps = claim_steps(np.full(4, odds(0.3)), np.array([1.0, 1.0, -1.0, 0.0]), 0.0, "above")
    # Constant odds(.3) > 0: the rising draw tips at -.3.
    np.testing.assert_allclose(steps.places, [-0.3, 0.3], atol=1e-12)
    np.testing.assert_allclose(steps.between, [0.75, 1.0, 0.5])
    np.testing.assert_allclose(steps.at, [0.75, 0.5])


def test_a_crossing_that_rounds_to_one_is_never_crossed():
    steps = claim_steps(np.array([1.0, 1.0]), np.array([1e-20, -1e-20]), 0.0, "above")
    assert steps.places.size == 0
    assert steps.value(0.9) == 1.0
    assert holds_throughout(np.array([1.0, 1.0]), np.array([1e-20, -1e-20]), 0.0, "above", -1, 1).tolist() == [1, 1]


@pytest.mark.parametrize(("limit", "direction"), CASES)
@pytest.mark.parametrize(("lower", "upper"), [(-0.5, 0.2), (-1.0, 1.0), (0.3, 0.3)])
def test_a_claim_that_holds_throughout_holds_at_both_ends_and_between(limit, direction, lower, upper):
    constant, slope = lines()
    grid = np.linspace(max(lower, -1 + 1e-15), min(upper, 1 - 1e-15), 401)
    effect = constant[:, None] - slope[:, None] * odds(grid)
    brute = np.all(effect > limit if direction == "above" else effect < limit, axis=1)
    found = holds_throughout(constant, slope, limit, direction, lower, upper)
    np.testing.assert_array_equal(found, brute)
    assert found.mean() <= smallest_value(claim_steps(constant, slope, limit, direction), lower, upper)[0]


@pytest.mark.parametrize(("lower", "upper"), [(-0.3, 0.3), (-1.0, 1.0), (0.05, 0.9), (-0.8, -0.79)])
def test_smallest_and_largest_value_equal_those_of_a_fine_grid(lower, upper):
    steps = claim_steps(*lines(), 0.0, "above")
    inner = steps.places[(steps.places > lower) & (steps.places < upper)]
    edges = np.concatenate([[lower], inner, [upper]])
    grid = np.concatenate([inner, (edges[:-1] + edges[1:]) / 2, [lower, upper]])
    values = steps.value(grid)
    for sign, shape in ((1, steps), (-1, steps.negated())):
        value, place = smallest_value(shape, lower, upper)
        assert value == pytest.approx((sign * values).min(), abs=1e-12)
        assert lower <= place <= upper
        assert sign * steps.value(place) == value
    # The extremes lie inside, not at the ends, which a look at the ends alone would miss.
    if (lower, upper) == (-1.0, 1.0):
        assert smallest_value(steps.negated(), lower, upper)[0] < -max(values[-2:]) - 0.05


def test_a_range_includes_its_ends_but_not_what_lies_beside_them():
    steps = Steps(np.array([0.2]), np.array([1.0, 0.5]), np.array([0.0]))
    assert smallest_value(steps, 0.2, 0.4)[0] == 0.0
    assert smallest_value(steps, 0.2, 0.4, ends=(False, True))[0] == 0.5
    assert smallest_value(steps.negated(), -0.1, 0.2)[0] == -1.0
    assert smallest_value(steps, 0.2, 0.2) == (0.0, 0.2)


@pytest.mark.parametrize(("mode", "lower", "upper"), [(0.1, -0.6, 0.8), (0.0, -1.0, 1.0), (-0.6, -0.6, 0.3)])
def test_no_unimodal_distribution_goes_further(mode, lower, upper):
    """Against a search over mixtures of uniform distributions with the mode for one end, and the mode itself."""
    steps = claim_steps(*lines(), 0.0, "above")
    random = np.random.default_rng(4)
    candidates = np.concatenate([random.uniform(lower, upper, 400), steps.places + 1e-12, [lower, upper]])
    candidates = candidates[(candidates >= lower) & (candidates <= upper) & (candidates != mode)]
    averages = [_average(steps, mode, end) for end in candidates]
    for sign, shape in ((1, steps), (-1, steps.negated())):
        found, end = smallest_average_from(shape, mode, lower, upper)
        single = np.append(sign * np.array(averages), sign * steps.value(mode))
        assert found == pytest.approx(single.min(), abs=1e-9)
        assert _average(steps, mode, end) == pytest.approx(sign * found, abs=1e-9)
        mixtures = random.dirichlet(np.full(5, 0.3), 500)
        picked = random.choice(single, (500, 5))
        assert np.all((mixtures * picked).sum(axis=1) >= found - 1e-12)


def _average(steps, mode, end):
    if end == mode:
        return float(steps.value(mode))
    cuts = np.unique(np.clip(np.concatenate([steps.places, [mode, end]]), min(mode, end), max(mode, end)))
    return float(steps.value((cuts[:-1] + cuts[1:]) / 2) @ np.diff(cuts) / abs(end - mode))


def test_the_tail_of_a_unimodal_distribution_is_bounded_as_khinchin_says():
    """With the mode at 0 on [0, b], P(rho > t) is at most (b - t)/b."""
    found, end = smallest_average_from(one_step(0.3).negated(), 0.0, 0.0, 0.8)
    assert -found == pytest.approx((0.8 - 0.3) / 0.8, abs=1e-12)
    assert end == 0.8


@pytest.mark.parametrize("divergence", [1e-6, 0.01, 0.3, 2.0])
def test_tilting_solves_the_dual(divergence):
    random = np.random.default_rng(8)
    masses, values = random.dirichlet(np.full(40, 0.5)), random.integers(0, 12, 40) / 12
    for sign in (1, -1):
        factors = tilt(masses, sign * values, divergence)
        found = masses * factors @ (sign * values)
        positive = factors > 0
        used = masses[positive] * factors[positive] @ np.log(factors[positive])
        assert masses @ factors == pytest.approx(1, abs=1e-12)
        assert used <= divergence + 1e-9

        def dual(log_theta, sign=sign):
            theta = np.exp(log_theta)
            top = (-sign * values / theta).max()
            return theta * (np.log(masses @ np.exp(-sign * values / theta - top)) + top) + theta * divergence

        best = minimize_scalar(dual, bounds=(-9, 9), method="bounded", options={"xatol": 1e-9}).fun
        assert found == pytest.approx(-best, abs=1e-6)


def test_a_wide_ball_reaches_the_smallest_value_and_a_ball_of_radius_zero_nothing():
    masses, values = np.array([0.2, 0.3, 0.5, 0.0]), np.array([0.0, 1.0, 2.0, -5.0])
    np.testing.assert_allclose(tilt(masses, values, 1.7), [5, 0, 0, 0])  # -log 0.2 = 1.609
    np.testing.assert_allclose(tilt(masses, values, 0.0), np.ones(4))
    assert tilt(masses, values, 1.6)[1] > 0


STATEMENTS = {
    "tail": [Bound((0.3, np.inf), 0.0, 0.1)],
    "tail and sign": [Bound((0.3, np.inf), 0.0, 0.1), Bound((0.0, np.inf), 0.7, 0.7)],
    "mean": [Bound(None, 0.0, 0.2)],
    "mean, sign and middle": [
        Bound(None, 0.1, 0.1),
        Bound((0.0, np.inf), 0.7, 0.7),
        Bound((-0.1, 0.25), 0.3, 0.6),
    ],
    "nothing": [],
}


@pytest.mark.parametrize("name", STATEMENTS)
@pytest.mark.parametrize(("lower", "upper"), [(-0.8, 0.9), (-1.0, 1.0)])
def test_the_programme_equals_one_over_every_step(name, lower, upper):
    """Against a programme with a column on each step, just before it and just after it: thousands in place of tens."""
    bounds, steps = STATEMENTS[name], claim_steps(*lines(), 0.0, "above")
    edge = 1e-9
    cuts = [end for bound in bounds if bound.event for end in bound.event if np.isfinite(end)]
    places = np.concatenate([steps.places, cuts, [lower, upper]])
    places = np.concatenate([places, places - edge, places + edge])
    places = np.unique(np.clip(places, max(lower, -1 + edge), min(upper, 1 - edge)))
    rows = [places if b.event is None else ((places > b.event[0]) & (places < b.event[1])) * 1.0 for b in bounds]
    limits = np.array([[b.least, b.most] for b in bounds]).reshape(-1, 2)
    inequalities = np.concatenate([rows, np.negative(rows)]) if rows else None
    for sign, shape in ((1, steps), (-1, steps.negated())):
        brute = linprog(
            sign * steps.value(places),
            A_ub=inequalities,
            b_ub=np.concatenate([limits[:, 1], -limits[:, 0]]) if rows else None,
            A_eq=np.ones((1, places.size)),
            b_eq=[1],
        )
        found = smallest_under(bounds, shape, lower, upper)
        assert found.average == pytest.approx(brute.fun, abs=1e-6)
        # The distribution returned has that average, lies in the range and meets the bounds.
        assert found.weights @ (sign * steps.value(found.places)) == pytest.approx(found.average, abs=1e-9)
        assert np.all((found.places >= lower) & (found.places <= upper))
        for bound in bounds:
            inside = (
                found.places
                if bound.event is None
                else (found.places > bound.event[0]) & (found.places < bound.event[1])
            )
            assert bound.least - 1e-7 <= found.weights @ inside <= bound.most + 1e-7


@pytest.mark.parametrize(("mean", "place"), [(0.1, 0.4), (0.3, 0.31), (0.5, 0.2)])
def test_a_mean_bounds_a_tail_as_markov_says(mean, place):
    """Markov's inequality is sharp: with rho >= 0, P(rho > t) can be min(1, mean / t)."""
    found = smallest_under([Bound(None, mean, mean)], one_step(place).negated(), 0.0, 0.9)
    assert -found.average == pytest.approx(min(1.0, mean / place), abs=1e-6)


@pytest.mark.parametrize(("lower", "upper"), [(-0.9, 0.8), (-0.4, 0.9)])
def test_odds_over_statements_equal_a_fine_grid(lower, upper):
    cuts = np.array([0.3, 0.0, -0.1, 0.25])
    grid = np.unique(np.concatenate([np.linspace(lower, upper, 1501), cuts, cuts - 1e-9, cuts + 1e-9]))
    for bounds in STATEMENTS.values():
        rows = [grid if b.event is None else ((grid > b.event[0]) & (grid < b.event[1])) * 1.0 for b in bounds]
        limits = np.array([[b.least, b.most] for b in bounds]).reshape(-1, 2)
        for own, sign, ends in ((bounds, 1, (lower, upper)), (mirrored(bounds), -1, (-upper, -lower))):
            brute = linprog(
                sign * odds(grid),
                A_ub=np.concatenate([rows, np.negative(rows)]) if rows else None,
                b_ub=np.concatenate([limits[:, 1], -limits[:, 0]]) if rows else None,
                A_eq=np.ones((1, grid.size)),
                b_eq=[1],
            )
            assert smallest_odds(own, *ends) == pytest.approx(brute.fun, abs=1e-4)


def test_odds_are_infinite_exactly_where_mass_may_reach_one():
    free = [Bound((0.3, np.inf), 0.0, 0.1)]
    assert smallest_odds(free, -1.0, 1.0) == -np.inf
    assert smallest_odds(mirrored(free), -1.0, 1.0) == -np.inf
    shut = [Bound((0.3, np.inf), 0.0, 0.0), Bound((-np.inf, -0.5), 0.0, 0.2)]
    assert -smallest_odds(mirrored(shut), -1.0, 1.0) == pytest.approx(odds(0.3), abs=1e-6)
    assert smallest_odds(shut, -1.0, 1.0) == -np.inf
    # A mean of one half with all mass at or above one half leaves no choice.
    fixed = [Bound(None, 0.5, 0.5), Bound((-np.inf, 0.5), 0.0, 0.0)]
    assert smallest_odds(fixed, -1.0, 1.0) == pytest.approx(odds(0.5), abs=1e-6)
    assert -smallest_odds(mirrored(fixed), -1.0, 1.0) == pytest.approx(odds(0.5), abs=1e-6)


def test_a_conflict_is_named_without_bystanders():
    sign, tail, mean, middle = (
        [Bound((0.0, np.inf), 0.0, 0.2)],
        [Bound((0.3, np.inf), 0.5, 1.0)],
        [Bound(None, -0.2, 0.6)],
        [Bound((-0.1, 0.1), 0.1, 1.0)],
    )
    assert conflict([sign, mean, middle], -0.9, 0.9) == []
    assert conflict([middle, sign, mean, tail], -0.9, 0.9) == [1, 3]
    # Three that clash only together: P(rho > 0) <= .2 and rho <= .9 leave a mean of at most .18.
    assert conflict([[Bound(None, 0.19, 1.0)], sign, middle], -0.9, 0.9) == [0, 1]
    assert conflict([[Bound(None, 0.95, 0.95)]], -0.9, 0.9) == [0]
    assert conflict([], -0.9, 0.9) == []


def test_random_distributions_that_meet_statements_stay_inside():
    random = np.random.default_rng(12)
    constant, slope = lines()
    steps = claim_steps(constant, slope, 0.0, "above")
    for _ in range(40):
        places = random.uniform(-0.9, 0.9, 6)
        belief = Mixture([PointMass(float(p)) for p in places], random.dirichlet(np.full(6, 0.5)))
        cut, mean = random.uniform(-0.5, 0.5), belief.rho_mean()
        bounds = [
            Bound((cut, np.inf), float(belief.above(cut)), 1.0),
            Bound((-np.inf, cut - 0.2), 0.0, float(belief.below(cut - 0.2)) + 1e-12),
            Bound(None, mean - 1e-9, mean + 0.05),
        ]
        probability = claim_probability(constant, slope, 0.0, "above", belief).mean()
        assert smallest_under(bounds, steps, -0.9, 0.9).average <= probability + 1e-7
        assert -smallest_under(bounds, steps.negated(), -0.9, 0.9).average >= probability - 1e-7
        first = belief.odds_moments()[0]
        low, high = smallest_odds(bounds, -0.9, 0.9), -smallest_odds(mirrored(bounds), -0.9, 0.9)
        assert low - 1e-4 <= first <= high + 1e-4
