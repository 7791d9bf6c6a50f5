"""Pictures, one file each; every one comes with a text alternative made of its numbers."""

from bayesmed.plots.beliefs import plot_beliefs
from bayesmed.plots.checks import plot_predictions, plot_spread
from bayesmed.plots.effect_by_rho import plot_effect_by_rho
from bayesmed.plots.envelope import plot_envelope
from bayesmed.plots.picture import Picture, Theme
from bayesmed.plots.prior_map import plot_prior_map
from bayesmed.plots.rho import plot_rho
from bayesmed.plots.sampling import plot_sampling
from bayesmed.plots.tipping import plot_tipping
from bayesmed.plots.tipping_curve import plot_tipping_curve
from bayesmed.plots.yardsticks import plot_yardsticks

__all__ = [
    "Picture",
    "Theme",
    "plot_beliefs",
    "plot_effect_by_rho",
    "plot_envelope",
    "plot_predictions",
    "plot_prior_map",
    "plot_rho",
    "plot_sampling",
    "plot_spread",
    "plot_tipping",
    "plot_tipping_curve",
    "plot_yardsticks",
]
