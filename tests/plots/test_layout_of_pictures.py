"""Nothing overlaps, nothing is cut off: at 1, 3 and 8 moderator values, 2 and 12 beliefs, short labels and long."""

import itertools
from collections.abc import Callable
from typing import Any

import pytest
from matplotlib.figure import Figure
from matplotlib.transforms import Bbox

import bayesmed as bm
from bayesmed import plots
from bayesmed.conclusions.comparison import compare
from bayesmed.conclusions.prior_map import prior_map
from bayesmed.conclusions.tipping import tipping
from bayesmed.conclusions.yardsticks import yardsticks
from bayesmed.fit.result import FitResult
from bayesmed.plots.beliefs import plot_beliefs
from bayesmed.plots.effect_by_rho import plot_effect_by_rho
from bayesmed.plots.picture import Picture

Drawn = Callable[[Figure], dict[str, list[Bbox]]]

POINTS: dict[int, dict[str, Any]] = {
    1: {},
    3: {"confidence": [4, 6, 8]},
    8: {"confidence": [2, 3, 4, 5, 6, 7, 8, 9]},
}
PRIORS = (
    bm.PointMass(0.0), bm.Uniform(0, 0.5), bm.LKJ(1), bm.LKJ(8), bm.FisherNormal(0.2, 0.1), bm.PointMass(-0.6),
    bm.FisherNormal(-0.2, 0.1), bm.TruncatedNormal(0.5, 0.1), bm.Uniform(-0.9, 0.9), bm.StretchedBeta(0.6, 0.6),
    bm.StretchedBeta(4, 2), bm.Uniform(-0.3, 0.3),
)  # fmt: skip
KINDS = ["effect_by_rho", "beliefs", "tipping", "prior_map", "yardsticks", "rho"]
SHORT = [f"b{k}" for k in range(len(PRIORS))]
LONG = [
    f"belief {k}: what the second reviewer of the grant application wrote about motivation in 2024"
    for k in range(len(PRIORS) - 2)
] + ["Ünbröken" * 12, "<b>$\\frac{1}{2}$</b> _a_ \n new line, \"quoted\", 50 % & more"]  # fmt: skip


def picture(kind: str, knee: FitResult, points: int, beliefs: int, labels: list[str], claim: bm.Claim) -> Picture:
    chosen = dict(zip(labels[-beliefs:], PRIORS[:beliefs], strict=True))
    match kind:
        case "effect_by_rho":
            return plot_effect_by_rho(knee, chosen, POINTS[points], claim)
        case "tipping":
            return plots.plot_tipping(tipping(knee, POINTS[points], claim), chosen)
        case "prior_map":
            mapped = prior_map(knee, at=POINTS[points], claim=claim, mean=[-0.5, 0, 0.5], sd=[0.1, 0.3, 0.6])
            return plots.plot_prior_map(mapped, chosen)
        case "yardsticks":
            names = {"age": labels[-1], "body_mass_index": labels[0]}
            tips = tipping(knee, POINTS[points], claim)
            return plots.plot_yardsticks(yardsticks(knee, strength=[0.5, 1, 2][:beliefs]), tips, labels=names)
        case "rho":
            return plots.plot_rho(compare(knee, chosen, POINTS[points], claim))
    return plot_beliefs(compare(knee, chosen, POINTS[points], claim))


def assert_clean(figure: Figure, boxes: dict[str, list[Bbox]]) -> None:
    flat = [(text, box) for text, several in boxes.items() for box in several]
    assert flat
    edge = figure.bbox
    for text, box in flat:
        inside = box.x0 >= -1 and box.y0 >= -1 and box.x1 <= edge.width + 1 and box.y1 <= edge.height + 1
        assert inside, f"{text!r} is cut off"
    for (text, box), (other, against) in itertools.combinations(flat, 2):
        # Boxes of lines reach a little above and below their letters: a pixel either way is no overlap.
        apart = (
            box.x1 <= against.x0 + 1 or against.x1 <= box.x0 + 1 or box.y1 <= against.y0 + 1 or against.y1 <= box.y0 + 1
        )
        assert apart, f"{text!r} overlaps {other!r}"


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("points", "beliefs", "labels"),
    [(1, 2, SHORT), (1, 12, LONG), (3, 2, LONG), (3, 12, SHORT), (8, 2, SHORT), (8, 12, LONG)],
    ids=lambda value: value if isinstance(value, int) else "short" if value is SHORT else "long",
)
def test_no_text_overlaps_or_is_cut_off(
    knee: FitResult, drawn: Drawn, kind: str, points: int, beliefs: int, labels: list[str]
) -> None:
    made = picture(kind, knee, points, beliefs, labels, bm.Claim())
    assert_clean(made.figure, drawn(made.figure))


@pytest.mark.parametrize("kind", KINDS)
def test_a_long_claim_fits(knee: FitResult, drawn: Drawn, kind: str) -> None:
    made = picture(kind, knee, 3, 2, SHORT, bm.Claim("indirect", below=-12345.678, required=0.975))
    assert_clean(made.figure, drawn(made.figure))


def test_the_check_itself_sees_an_overlap_and_a_cut(drawn: Drawn) -> None:
    overlapping, cut = Figure(), Figure()
    overlapping.text(0.5, 0.5, "one")
    overlapping.text(0.51, 0.5, "two")
    cut.text(0.99, 0.5, "far out")
    for figure, words in ((overlapping, "'one' overlaps 'two'"), (cut, "'far out' is cut off")):
        with pytest.raises(AssertionError, match=words):
            assert_clean(figure, drawn(figure))


@pytest.mark.parametrize("kind", ["effect_by_rho", "beliefs", "tipping", "prior_map", "rho"])
def test_every_label_is_drawn_whole_and_never_as_mathematics(knee: FitResult, drawn: Drawn, kind: str) -> None:
    made = picture(kind, knee, 3, 12, LONG, bm.Claim())
    lines = "".join("".join(text.split()) for text in drawn(made.figure))
    for label in LONG:
        assert "".join(label.split())[:20] in lines
        assert "".join(label.split())[-20:] in lines


def test_a_users_style_does_not_change_what_is_measured(knee: FitResult, drawn: Drawn) -> None:
    import matplotlib

    with matplotlib.rc_context({"font.size": 30, "axes.titlesize": 40, "lines.linewidth": 9, "axes.grid": True}):
        made = picture("beliefs", knee, 8, 12, LONG, bm.Claim())
        assert_clean(made.figure, drawn(made.figure))


@pytest.mark.parametrize("words", [{}, {"confidence": LONG[0], "exercise": LONG[1], "function": LONG[2]}], ids=len)
def test_pictures_of_one_fit_are_clean(knee: FitResult, nuts: FitResult, drawn: Drawn, words: dict[str, str]) -> None:
    along = tipping(knee, {"confidence": [4]}, bm.Claim())
    for made in (
        plots.plot_tipping_curve(along, "confidence", labels=words),
        plots.plot_envelope(knee, bm.AnyOn(-0.3, 0.3), "confidence", values=[2, 5, 8], labels=words),
        plots.plot_predictions(knee, labels=words),
        plots.plot_spread(knee, labels=words),
        plots.plot_sampling(nuts, labels=words),
    ):
        assert_clean(made.figure, drawn(made.figure))


@pytest.mark.parametrize("kind", ["effect_by_rho", "beliefs", "tipping", "prior_map", "rho"])
def test_axes_of_the_users_own_are_filled_and_nothing_beside_them(knee: FitResult, drawn: Drawn, kind: str) -> None:
    figure = Figure(figsize=(14, 16))
    ax = figure.add_axes((0.1, 0.2, 0.75, 0.7))
    labels = SHORT[:3]
    with_axes = dict(zip(labels, PRIORS[:3], strict=True))
    match kind:
        case "effect_by_rho":
            plot_effect_by_rho(knee, with_axes, POINTS[3], ax=ax)
        case "beliefs":
            plot_beliefs(compare(knee, with_axes, POINTS[3]), ax=ax)
        case "tipping":
            plots.plot_tipping(tipping(knee, POINTS[3], bm.Claim()), with_axes, ax=ax)
        case "prior_map":
            plots.plot_prior_map(prior_map(knee, at=POINTS[3], mean=[-0.5, 0, 0.5], sd=[0.1, 0.6]), with_axes, ax=ax)
        case "rho":
            plots.plot_rho(compare(knee, with_axes, POINTS[3]), ax=ax)
    boxes = drawn(figure)
    assert_clean(figure, boxes)
    place = ax.get_window_extent()
    for text, several in boxes.items():
        for box in several:
            across = place.x0 - 1 <= box.x0 and box.x1 <= place.x1 + 1
            assert across, f"{text!r} leaves the axes to a side"
            assert place.y0 - 1 <= box.y0, f"{text!r} leaves the axes below"
            assert box.y1 <= place.y1 + 1, f"{text!r} leaves the axes above"
