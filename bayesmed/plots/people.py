"""How the rows of a study are spread along a moderator: bars along the foot of an axis."""

from typing import TYPE_CHECKING

import numpy as np

from bayesmed.core.mapping import Array
from bayesmed.plots.picture import colours
from bayesmed.study.observe import Observed

if TYPE_CHECKING:
    from matplotlib.axes import Axes

BINS = 60


def people(axes: "Axes", observed: Observed, moderator: str, foot: float, height: float) -> None:
    """Draw a bar for each stretch of the moderator, as high as its share of rows, on `foot`; nothing without rows."""
    values = moderator_rows(observed, moderator)
    if values is None:
        return
    counts, edges = np.histogram(values, BINS)
    for count, left, right in zip(counts, edges[:-1], edges[1:], strict=True):
        if count:
            middle = (left + right) / 2
            top = foot + height * count / counts.max()
            axes.plot([middle, middle], [foot, top], color=colours().ink, linewidth=1.1, solid_capstyle="butt")


def moderator_rows(observed: Observed, moderator: str) -> Array | None:
    """Return the values of a numeric moderator in the rows used, or None where no rows are held."""
    if observed.published is not None or moderator not in observed.frame:
        return None
    values = observed.frame[moderator].to_numpy(dtype=float)
    return np.asarray(values[np.isfinite(values)]) if len(values) else None
