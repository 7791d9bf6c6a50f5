"""What the further pictures show and say: numbers of the conclusions, themes, words and refusals."""

import re
from pathlib import Path

import numpy as np
import pytest
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.image import imread

import bayesmed as bm
from bayesmed import plots
from bayesmed.conclusions.comparison import compare
from bayesmed.conclusions.envelope import envelope
from bayesmed.conclusions.prior_map import prior_map
from bayesmed.conclusions.tipping import tipping
from bayesmed.conclusions.words import probability_text
from bayesmed.conclusions.yardsticks import yardsticks
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.diagnose import rank_diagnostics
from bayesmed.fit.result import FitResult
from bayesmed.study.spread import residual_spread

AT = {"confidence": [4, 8]}
BELIEFS = {"none": bm.PointMass(0.0), "half": bm.Uniform(0, 0.5)}


def drawings(knee: FitResult, **options: object) -> dict[str, plots.Picture]:
    tips = tipping(knee, AT, bm.Claim())
    return {
        "tipping": plots.plot_tipping(tips, BELIEFS, **options),
        "curve": plots.plot_tipping_curve(tipping(knee, {}, bm.Claim()), "confidence", [4, 6, 8], **options),
        "map": plots.plot_prior_map(prior_map(knee, at=AT, mean=[-0.5, 0, 0.5], sd=[0.1, 0.6]), BELIEFS, **options),
        "yardsticks": plots.plot_yardsticks(yardsticks(knee, at=AT), tips, **options),
        "envelope": plots.plot_envelope(knee, bm.AnyOn(-0.3, 0.3), "confidence", [4, 8], **options),
        "rho": plots.plot_rho(compare(knee, BELIEFS, AT), **options),
        "predictions": plots.plot_predictions(knee, **options),
        "spread": plots.plot_spread(knee, **options),
        "beliefs": plots.plot_beliefs(compare(knee, BELIEFS, AT), **options),
        "effect_by_rho": plots.plot_effect_by_rho(knee, BELIEFS, AT, **options),
    }


def colours_of(figure: Figure) -> set[tuple[float, ...]]:
    found: set[tuple[float, ...]] = set()
    for artist in figure.findobj():
        for ask in ("get_color", "get_facecolor", "get_edgecolor", "get_markerfacecolor", "get_markeredgecolor"):
            value = getattr(artist, ask, lambda: None)()
            if value is None or (isinstance(value, str) and value in ("none", "auto", "face")):
                continue
            for one in np.atleast_2d(np.asarray(to_rgb(value) if isinstance(value, str) else value, dtype=float)):
                if one.size in (3, 4) and (one.size == 3 or one[3] > 0):
                    found.add(tuple(round(float(c), 3) for c in one[:3]))
    return found


def test_black_is_drawn_in_greys_alone(knee: FitResult) -> None:
    for name, made in drawings(knee, theme="black").items():
        seen = colours_of(made.figure)
        assert len(seen) >= 2, name
        assert all(max(one) - min(one) < 0.01 for one in seen), (name, seen)


def test_dark_is_light_on_dark(knee: FitResult, drawn: object) -> None:
    made = plots.plot_rho(compare(knee, BELIEFS, AT), theme="dark")
    assert max(to_rgb(made.figure.get_facecolor())) < 0.2
    assert made.figure.texts
    assert all(min(to_rgb(text.get_color())) > 0.8 for text in made.figure.texts)


def test_words_stand_in_place_of_names(knee: FitResult) -> None:
    for name, made in drawings(knee, labels={"none": "Nothing left out", "confidence": "Confidence (0 to 10)"}).items():
        if name in ("rho", "tipping", "map", "beliefs", "effect_by_rho"):
            assert "Nothing left out" in made.text, name
            assert not re.search(r"\bnone\b", made.text), name
        if name in ("tipping", "curve", "map", "yardsticks", "envelope", "beliefs", "effect_by_rho"):
            assert "Confidence (0 to 10) = " in made.text, name


def test_the_words_hold_the_numbers(knee: FitResult, nuts: FitResult) -> None:
    made = drawings(knee)
    tips = tipping(knee, AT, bm.Claim())
    for _, row in tips.table.iterrows():
        assert f"tips at {row['median']:.2f}" in made["tipping"].text
        assert f"{row['median']:.2f} [{row['lower']:.2f}, {row['upper']:.2f}]" in made["yardsticks"].text
    for _, row in tips.probability(BELIEFS["half"]).iterrows():
        shown = probability_text(row["probability"], row["mcse"])
        assert f"half: probability {shown}, Monte Carlo error {row['mcse']:.1g}" in made["tipping"].text
    for _, row in envelope(knee, bm.AnyOn(-0.3, 0.3), AT).iterrows():
        low, high = (probability_text(row[end], row[f"{end}_mcse"]) for end in ("lower", "upper"))
        assert f"= {row['confidence']:g}: {low} to {high}" in made["envelope"].text
    for one in residual_spread(knee.observed):
        assert str(one) in made["spread"].text
    table = rank_diagnostics(nuts)
    assert table is not None
    said = plots.plot_sampling(nuts).text
    for _, row in table.iterrows():
        assert f"{row['quantity']}: {row['bulk']:.0f} in the middle" in said


def test_a_belief_is_hatched_where_the_claim_is_true(knee: FitResult) -> None:
    """At the median draw, by hand: the share of the uniform belief below the median tipping correlation."""
    tips = tipping(knee, {"confidence": [4]}, bm.Claim())
    made = plots.plot_tipping(tips, {"half": bm.Uniform(0, 0.5)})
    strip = made.figure.axes[-1]
    areas = {
        bool(p.get_hatch()): float(np.sum(np.diff(p.get_data().edges) * p.get_data().values)) for p in strip.patches
    }
    wanted = min(max(float(tips.table["median"].iloc[0]) / 0.5, 0.0), 1.0)
    assert areas.get(True, 0.0) / sum(areas.values()) == pytest.approx(wanted, abs=0.03)


def test_predictions_of_a_model_that_is_right_hold_nine_rows_in_ten(simulated: object) -> None:
    data = simulated(2000, rho=0.3, seed=5)  # type: ignore[operator]
    study = bm.Study(data, exposure="x", mediator="m ~ x*z + c + site", outcome="y ~ m*z + m:x + m:c + x*z + c + site")
    said = plots.plot_predictions(study.fit(method="exact", draws=50, random_seed=1, progressbar=False)).text
    outside = [int(n) for n in re.findall(r"in (\d+) of 30 bars", said)]
    assert len(outside) == 2
    # Binomial with 30 bars and a share of about .1: more than 9 happens in under 1 in 500.
    assert max(outside) <= 9
    bent = data.assign(y=np.exp(data["y"] / 3))
    wrong = bm.Study(bent, exposure="x", mediator="m ~ x*z + c + site", outcome="y ~ m*z + x*z + c + site")
    said = plots.plot_predictions(wrong.fit(method="exact", draws=50, random_seed=1, progressbar=False)).text
    assert int(re.findall(r"in (\d+) of 30 bars", said)[1]) > 9


def test_front_objects_draw_themselves(knee: FitResult) -> None:
    fit = bm.Fit(knee)
    assert fit.tipping(at=AT).plot(BELIEFS).text == plots.plot_tipping(fit.tipping(at=AT), BELIEFS).text
    assert "times" not in fit.yardsticks().plot().title
    assert fit.yardsticks().plot(fit.tipping(at=AT)).text.count("confidence = ") == 2
    assert bm.plots.plot_beliefs(fit.compare(BELIEFS, at=AT)).text == fit.compare(BELIEFS, at=AT).plot().text


def test_what_cannot_be_drawn_is_refused(knee: FitResult) -> None:
    comparison = compare(knee, BELIEFS, AT)
    narrow = Figure(figsize=(4, 4)).add_subplot()
    low = Figure(figsize=(14, 1)).add_subplot()
    for action, words in (
        (
            lambda: plots.plot_tipping(comparison, BELIEFS),
            "fit.tipping\\(\\) returned; found ComparisonResult",
        ),
        (lambda: plots.plot_tipping(tipping(knee, AT, bm.Claim()), {}), "at least one belief"),
        (lambda: plots.plot_beliefs(comparison, theme="sepia"), "theme='sepia' is not known; allowed are 'blue'"),
        (lambda: plots.plot_beliefs(comparison, labels={"none": 3}), "labels=.* must be a dict of name → words"),
        (lambda: plots.plot_beliefs(comparison, ax=3), "ax=3 must be a matplotlib Axes"),
        (lambda: plots.plot_rho(comparison, ax=narrow), "the axes are .* inches wide; this picture needs at least 5"),
        (lambda: plots.plot_rho(comparison, ax=low), "inches high; this picture needs"),
        (lambda: plots.plot_sampling(knee), "have no diagnostics"),
        (lambda: plots.plot_prior_map(3), "must be what fit.prior_map"),
        (lambda: plots.plot_envelope(knee, bm.AnyOn(-0.3, 0.3), "nobody"), "moderator='nobody' is not a column"),
    ):
        with pytest.raises(ArgumentError, match=words):
            action()


def test_a_belief_off_the_map_stays_on_its_edge_and_is_said_to_be_off(knee: FitResult) -> None:
    mapped = prior_map(knee, at={"confidence": 4}, mean=[-0.5, 0, 0.5], sd=[0.1, 0.6])
    made = plots.plot_prior_map(mapped, {"wide": bm.StretchedBeta(0.6, 0.6), "far": bm.PointMass(0.8), "in": bm.LKJ(4)})
    panel = made.figure.axes[-1]
    for line in panel.lines:
        if line.get_marker() not in ("None", None):
            assert -0.5 <= line.get_xdata()[0] <= 0.5
            assert 0.1 <= line.get_ydata()[0] <= 0.6
    words = [text.get_text() for text in made.figure.texts]
    assert sum("(off the map" in word for word in words) == 2
    assert made.text.count("off the map") == 2


@pytest.mark.parametrize("dpi", [72, 95, 150])
def test_long_labels_are_not_cut_at_any_resolution(knee: FitResult, tmp_path: Path, dpi: int) -> None:
    """As drawn: nothing but paper in the outermost pixels of the file."""
    mapped = prior_map(knee, at={}, mean=[-0.5, 0, 0.5], sd=[0.1, 0.6])
    path = plots.plot_prior_map(mapped, {"M" * 300: 0.0, "b": bm.LKJ(2)}).savefig(tmp_path / "p.png", dpi=dpi)
    pixels = imread(path)[..., :3]
    for edge in (pixels[:, :2], pixels[:, -2:], pixels[:2], pixels[-2:]):
        assert edge.min() > 0.99
