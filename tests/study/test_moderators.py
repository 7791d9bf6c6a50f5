"""Moderators: those that share a term with the exposure or the mediator, by path."""

import pytest

from bayesmed.study.moderators import PAST_MEDIATOR, TO_MEDIATOR, TO_OUTCOME, Moderator
from bayesmed.study.observe import observe


@pytest.mark.parametrize(
    ("mediator", "outcome", "expected"),
    [
        ("m ~ x + z", "y ~ m + x + z", {}),
        ("m ~ x*z", "y ~ m + x*z", {"z": (TO_MEDIATOR, PAST_MEDIATOR)}),
        ("m ~ x + z", "y ~ m*z + x", {"z": (TO_OUTCOME,)}),
        ("m ~ x*site", "y ~ m*site + x", {"site": (TO_MEDIATOR, TO_OUTCOME)}),
        ("m ~ x", "y ~ m*x*age + z", {"age": (TO_OUTCOME, PAST_MEDIATOR)}),
        ("m ~ x", "y ~ m + x + I(m*z)", {"z": (TO_OUTCOME,)}),
        ("m ~ x + I(x*age)", "y ~ m + x", {"age": (TO_MEDIATOR,)}),
        ("m ~ x:bs(age, df=4)", "y ~ m + x", {"age": (TO_MEDIATOR,)}),
        ("m ~ x", "y ~ m:z:age + m + x", {"z": (TO_OUTCOME,), "age": (TO_OUTCOME,)}),
        ("log(steps) ~ x", "y ~ log(steps)*z + x", {"z": (TO_OUTCOME,)}),
        ("m ~ x", "y ~ m*x", {}),
        ("m ~ x", "y ~ m + x + z*age", {}),
    ],
)
def test_found_with_their_paths(frame, mediator, outcome, expected):
    ours = observe(frame, exposure="x", mediator=mediator, outcome=outcome)
    assert {moderator.name: moderator.paths for moderator in ours.moderators} == expected
    assert ours.default_moderators == tuple(expected)


def test_kinds(frame):
    ours = observe(frame, exposure="x", mediator="m ~ x*z + x*site + x*flag", outcome="y ~ m*C(age) + m:I(dose*z) + x")
    kinds = {moderator.name: moderator.kind for moderator in ours.moderators}
    assert kinds == {
        "z": "numeric",
        "site": "categorical",
        "flag": "categorical",
        "age": "categorical",
        "dose": "numeric",
    }


@pytest.mark.parametrize(
    ("chosen", "default"), [(["site"], ("site",)), ([], ()), ("z", ("z",)), (("site", "z"), ("site", "z"))]
)
def test_the_user_chooses_which_get_a_grid(frame, chosen, default):
    ours = observe(frame, exposure="x", mediator="m ~ x*z", outcome="y ~ m*site + x", moderators=chosen)
    assert ours.default_moderators == default
    assert ours.moderators[0] == Moderator("z", "numeric", (TO_MEDIATOR,))
    assert len(ours.moderators) == 2
