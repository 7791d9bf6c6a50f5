"""What the pictures show: numbers of the conclusions, weights of the beliefs, and the same in words."""

import sys
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import numpy as np
import pytest
from matplotlib.colors import to_hex
from matplotlib.patches import Rectangle

import bayesmed as bm
from bayesmed.conclusions.comparison import compare
from bayesmed.conclusions.summary import rho_grid
from bayesmed.fit.result import FitResult
from bayesmed.plots.beliefs import plot_beliefs
from bayesmed.plots.effect_by_rho import plot_effect_by_rho
from bayesmed.plots.picture import THEMES
from bayesmed.plots.strokes import joint_weight, shape, slice_edges, slice_mass, strokes
from bayesmed.study.points import points

AT = {"confidence": [4, 8]}
BELIEFS = {"none": bm.PointMass(0.0), "half": bm.Uniform(0, 0.5)}


def test_strokes_are_the_grid_of_fixed_rho(knee: FitResult) -> None:
    claim = bm.Claim()
    made = strokes(knee, BELIEFS, points(knee.observed, AT), claim, 0.95)
    grid = rho_grid(knee, None, AT, claim)
    grid = grid[grid["effect"] == "indirect"]
    for k, confidence in enumerate((4, 8)):
        rows = grid[grid["confidence"] == confidence]
        np.testing.assert_allclose(made.rho, rows["rho"])
        np.testing.assert_allclose(made.quantiles[k, :, 0], rows["lower"])
        np.testing.assert_allclose(made.quantiles[k, :, 4], rows["upper"])
        np.testing.assert_allclose(made.probability[k], rows["probability"])


def test_edges_lie_half_way_and_stay_inside() -> None:
    np.testing.assert_allclose(slice_edges(np.array([-0.9, 0.0, 0.4])), [-1.0, -0.45, 0.2, 0.6])


def test_mass_of_a_slice_is_its_probability() -> None:
    edges = np.array([-0.5, 0.0, 0.25, 0.5, 1.0])
    np.testing.assert_allclose(slice_mass(bm.Uniform(0, 0.5), edges), [0, 0.5, 0.5, 0])
    # An atom belongs to the slice that begins with it.
    np.testing.assert_allclose(slice_mass(bm.PointMass(0.25), edges), [0, 0, 1, 0])


def test_weight_is_the_average_of_what_each_belief_makes_of_a_slice() -> None:
    """By hand: relative to their own peaks the two beliefs give (0, 1, 0) and (0, 1, 1); averaged and scaled."""
    edges = np.array([-0.5, 0.0, 0.25, 0.5])
    beliefs = {"a": bm.PointMass(0.1), "b": bm.Uniform(0, 0.5)}
    np.testing.assert_allclose(joint_weight(beliefs, edges), [0, 1, 0.5])


def test_a_belief_wholly_outside_the_slices_weighs_nothing() -> None:
    edges = np.array([-0.1, 0.0, 0.1])
    np.testing.assert_allclose(joint_weight({"far": bm.PointMass(0.9)}, edges), [1, 1])
    np.testing.assert_allclose(joint_weight({"far": bm.PointMass(0.9), "b": bm.PointMass(0.05)}, edges), [0, 1])


def test_shape_keeps_atoms_out_of_the_smooth_part() -> None:
    _, height, atoms = shape(bm.PointMass(0.3), -0.95, 0.95)
    assert atoms == ((0.3, 1.0),)
    assert not height.any()
    _, height, atoms = shape(bm.Uniform(0, 0.5), -0.95, 0.95)
    assert atoms == ()
    # Slices are a hundredth wide and begin at hundredths, so that the edges of the uniform are edges of slices.
    np.testing.assert_allclose(np.unique(np.round(height, 9)), [0, 1])
    assert height.sum() == pytest.approx(50)


def test_blocks_are_as_wide_as_weights_and_filled_where_the_claim_reaches_what_it_requires(knee: FitResult) -> None:
    picture = plot_effect_by_rho(knee, BELIEFS, {"confidence": 4})
    made = strokes(knee, BELIEFS, points(knee.observed, {"confidence": 4}), bm.Claim(), 0.95)
    (panel,) = [a for a in picture.figure.axes if a.get_ylabel().startswith("effect")]
    blocks = [p for p in panel.patches if isinstance(p, Rectangle)]
    shown = made.weight * 0.082 * 72 * panel.get_window_extent().width / picture.figure.dpi / 1.9 >= 1.0
    assert len(blocks) == shown.sum() > 3
    for block, weight, probability in zip(blocks, made.weight[shown], made.probability[0, shown], strict=True):
        assert block.get_width() == pytest.approx(0.082 * weight)
        assert to_hex(block.get_facecolor()) == (THEMES["blue"].ink if probability >= 0.95 else "#ffffff")


def test_bars_run_from_what_is_required_to_what_there_is(knee: FitResult) -> None:
    comparison = compare(knee, BELIEFS, AT)
    picture = plot_beliefs(comparison)
    ends = []
    for axes in picture.figure.axes[1:]:
        ends += [patch.get_x() + patch.get_width() for patch in axes.patches]
        starts = {round(patch.get_x(), 9) for patch in axes.patches}
        assert starts == {round(np.log(0.95 / 0.05), 9)}
    found = comparison.claimed.sort_values(["confidence", "prior"], ascending=[True, False])["probability"]
    clipped = np.clip(found, 0.0005, 0.9995)
    np.testing.assert_allclose(ends, np.log(clipped / (1 - clipped)))


def test_the_three_verdicts_differ_without_colour(knee: FitResult) -> None:
    """Full ink, hatching, and nothing: what is printed in black and white tells them apart."""
    required = float(compare(knee, {"half": bm.Uniform(0, 0.5)}, {"confidence": 4}).claimed["probability"].iloc[0])
    beliefs = {"none": 0.0, "half": bm.Uniform(0, 0.5), "much": bm.PointMass(0.6)}
    comparison = compare(knee, beliefs, {"confidence": 4}, bm.Claim(required=max(required, 0.5)))
    looks = {
        verdict: (to_hex(patch.get_facecolor()), patch.get_hatch())
        for verdict, patch in zip(
            comparison.claimed["verdict"], plot_beliefs(comparison).figure.axes[1].patches, strict=True
        )
    }
    assert len(looks) == len(set(looks.values())) >= 2
    key = [(to_hex(p.get_facecolor()), p.get_hatch()) for p in plot_beliefs(comparison).figure.axes[0].patches]
    assert len(set(key)) == 3
    assert set(looks.values()) <= set(key)


def test_text_alternatives_hold_the_numbers(knee: FitResult) -> None:
    comparison = compare(knee, BELIEFS, AT)
    words = plot_beliefs(comparison).text
    assert "confidence = 4:" in words
    assert words.count("Monte Carlo error") == 4
    for verdict in comparison.claimed["verdict"]:
        assert verdict in words
    by_rho = plot_effect_by_rho(knee, BELIEFS, AT).text
    assert by_rho.count("ρ = 0: ") == 2
    assert "none: exactly 0" in by_rho
    assert "half: 0.25 [0.03, 0.47]" in by_rho


def test_saving_keeps_title_and_text_and_no_date(knee: FitResult, tmp_path: Path) -> None:
    picture = plot_beliefs(compare(knee, BELIEFS, AT), title="A <title> & more")
    saved = picture.savefig(tmp_path / "p.svg").read_bytes()
    root = ElementTree.fromstring(saved)
    dublin = "{http://purl.org/dc/elements/1.1/}"
    # The first title is the picture's; matplotlib names itself in another.
    assert next(root.iter(f"{dublin}title")).text == "A <title> & more"
    assert [e.text for e in root.iter(f"{dublin}description")] == [picture.text]
    assert not list(root.iter(f"{dublin}date"))
    assert picture.savefig(tmp_path / "q.pdf").read_bytes().startswith(b"%PDF")


def test_a_notebook_gets_an_image_with_its_alternative_escaped(knee: FitResult) -> None:
    html = plot_beliefs(compare(knee, {'<b>"x"</b>': 0.0}, {}))._repr_html_()
    assert html.startswith('<img alt="')
    assert "<b>" not in html
    assert "&lt;b&gt;&quot;x&quot;&lt;/b&gt;" in html


def test_drawing_leaves_pyplot_and_settings_alone(knee: FitResult) -> None:
    import matplotlib

    before = dict(matplotlib.rcParams)
    plot_beliefs(compare(knee, BELIEFS, {}))._repr_html_()
    assert dict(matplotlib.rcParams) == before
    pyplot = sys.modules.get("matplotlib.pyplot")
    assert pyplot is None or not pyplot.get_fignums()


@pytest.mark.parametrize("rho", [[0.1], 0.3, [0.1, 0.1], [0.0, 1.0], ["a", "b"]])
def test_rho_that_cannot_be_drawn_is_refused(knee: FitResult, rho: object) -> None:
    with pytest.raises(bm.errors.ArgumentError, match="rho="):
        plot_effect_by_rho(knee, BELIEFS, {}, rho=rho)  # type: ignore[arg-type]


def test_no_beliefs_is_refused(knee: FitResult) -> None:
    with pytest.raises(bm.errors.ArgumentError, match="at least one belief"):
        plot_effect_by_rho(knee, {}, {})
