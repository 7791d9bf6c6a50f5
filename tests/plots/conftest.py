"""An exact fit of the invented trial, and the texts that a figure really draws."""

import dataclasses
from collections.abc import Callable

import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text
from matplotlib.transforms import Bbox

import bayesmed as bm
from bayesmed.fit.result import FitResult

type Drawn = Callable[[Figure], dict[str, list[Bbox]]]


@pytest.fixture(scope="session")
def knee() -> FitResult:
    study = bm.Study(
        bm.load_example("knee_rehab"),
        exposure="coaching",
        mediator="exercise ~ coaching + confidence + age + body_mass_index",
        outcome="function ~ exercise * confidence + coaching + age + body_mass_index",
    )
    return study.fit(method="exact", draws=25, random_seed=1, progressbar=False).result


@pytest.fixture(scope="session")
def nuts(knee: FitResult) -> FitResult:
    """The same draws as if a sampler had made them, so that there is something to diagnose."""
    return knee.replaced(settings=dataclasses.replace(knee.settings, method="nuts"))


@pytest.fixture
def drawn(monkeypatch: pytest.MonkeyPatch) -> Drawn:
    """Return text → boxes in pixels of every text that drawing the figure puts on it."""

    def texts(figure: Figure) -> dict[str, list[Bbox]]:
        canvas = FigureCanvasAgg(figure)
        seen: list[Text] = []
        draw = Text.draw

        def noted(self: Text, renderer: object) -> None:
            if self.get_visible() and self.get_text().strip():
                seen.append(self)
            draw(self, renderer)

        with monkeypatch.context() as patch:
            patch.setattr(Text, "draw", noted)
            canvas.draw()
        boxes: dict[str, list[Bbox]] = {}
        for one in seen:
            boxes.setdefault(one.get_text(), []).append(one.get_window_extent(canvas.get_renderer()))
        return boxes

    return texts
