"""Counterfactual contrasts (A, B, kappa, T): all that any conclusion needs from a fit.

For rows i, exposure values x0 and x1, and every named moderator set to one point in all rows,

    B = mean_i [v_i(x1) - v_i(x0)]'alpha,            kappa = tau / sigma_m,
    A = mean_i E_e[w_i(x, m_i(x1) + e) - w_i(x, m_i(x0) + e)]'gamma,    e ~ Normal(0, sigma_m²),
    T = mean_i E_e[w_i(x1, m_i(x1) + e) - w_i(x0, m_i(x0) + e)]'gamma,

and ``indirect(rho) = A - kappa r B``, ``direct = T - indirect``. ``A`` at x = x1 belongs to the total natural
indirect effect, at x = x0 to the pure natural indirect effect. Averages of products over rows, never products
of averages.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from bayesmed.core.lines import Lines
from bayesmed.core.mapping import Array, odds

EFFECTS = ("indirect", "direct", "total", "pure_indirect", "total_direct")
"""Names of the effects, in the order in which tables show them."""


@dataclass(frozen=True)
class LinearMoments:
    """Row averages from which contrasts follow without the rows, where the outcome is linear in the mediator.

    With ``w_i(x, m) = a_i(x) + (m - centre) s_i(x)``, per moderator point:

    Attributes
    ----------
    exposure_shift : array, shape (point, mediator_term)
        ``mean_i [v_i(x1) - v_i(x0)]``.
    indirect : array, shape (point, outcome_term, mediator_term)
        ``mean_i s_i(x1) [v_i(x1) - v_i(x0)]'``.
    pure_indirect : array, same shape
        ``mean_i s_i(x0) [v_i(x1) - v_i(x0)]'``.
    total : array, same shape
        ``mean_i [s_i(x1) v_i(x1)' - s_i(x0) v_i(x0)']``.
    total_offset : array, shape (point, outcome_term)
        ``mean_i [a_i(x1) - a_i(x0)] - centre * mean_i [s_i(x1) - s_i(x0)]``.
    """

    exposure_shift: Array
    indirect: Array
    pure_indirect: Array
    total: Array
    total_offset: Array

    @property
    def exposure_meets_mediator(self) -> bool:
        """True if the slope of the mediator differs between the two exposure values."""
        return not np.allclose(self.indirect, self.pure_indirect, rtol=1e-10, atol=1e-12)


@dataclass(frozen=True)
class Contrasts:
    """Draws of (A, B, kappa, T) at each moderator point.

    Attributes
    ----------
    a, a_pure, b, t : array, shape (point, draw)
        Mediated contrast at ``rho = 0`` (exposure held at x1, and at x0), shift of the mediator, total effect.
    kappa : array, shape (draw,)
        ``tau / sigma_m``.
    """

    a: Array
    a_pure: Array
    b: Array
    t: Array
    kappa: Array
    _kept: dict[str, Lines] = field(default_factory=dict, init=False, repr=False, compare=False)

    @cached_property
    def effects(self) -> tuple[str, ...]:
        """The effects to show: all five where exposure and mediator interact, otherwise the first three."""
        scale = np.abs(self.a).max(initial=0.0)
        same = np.allclose(self.a, self.a_pure, rtol=1e-9, atol=1e-9 * scale)
        return EFFECTS[:3] if same else EFFECTS

    def effect(self, name: str, rho: Array | float) -> Array:
        """Return draws of one effect at `rho`.

        Parameters
        ----------
        name : str
            One of :data:`EFFECTS`.
        rho : float or array broadcastable to (point, draw)

        Returns
        -------
        array, shape (point, draw) or the broadcast of it with `rho`
        """
        constant, slope = self.line(name)
        return np.asarray(constant - slope * odds(np.asarray(rho, dtype=float)))

    def line(self, name: str) -> tuple[Array, Array]:
        """Return ``(c, k)``, each of shape (point, draw), such that the effect is ``c - k r``."""
        lines = self.lines(name)
        return lines.constant, lines.slope

    def lines(self, name: str) -> Lines:
        """Return an effect as lines; kept for the next call."""
        if name not in self._kept:
            self._kept[name] = Lines(*self._line(name))
        return self._kept[name]

    def _line(self, name: str) -> tuple[Array, Array]:
        bias = self.kappa * self.b
        match name:
            case "indirect":
                return self.a, bias
            case "pure_indirect":
                return self.a_pure, bias
            case "direct":
                return self.t - self.a, -bias
            case "total_direct":
                return self.t - self.a_pure, -bias
            case "total":
                return self.t, np.zeros_like(self.t)
        raise KeyError(name)


def linear_contrasts(moments: LinearMoments, alpha: Array, gamma: Array, sigma_m: Array, tau: Array) -> Contrasts:
    """Return the contrasts of every draw from row averages.

    Parameters
    ----------
    moments : LinearMoments
    alpha : array, shape (draw, mediator_term)
    gamma : array, shape (draw, outcome_term)
    sigma_m, tau : array, shape (draw,)
    """
    return Contrasts(
        a=_bilinear(moments.indirect, gamma, alpha),
        a_pure=_bilinear(moments.pure_indirect, gamma, alpha),
        b=moments.exposure_shift @ alpha.T,
        t=moments.total_offset @ gamma.T + _bilinear(moments.total, gamma, alpha),
        kappa=tau / sigma_m,
    )


def _bilinear(matrices: Array, left: Array, right: Array) -> Array:
    """Return ``left_s' K_p right_s`` for every point p and draw s."""
    points, q, p = matrices.shape
    # One matrix product over all points, then a row-wise product: no (point, draw, term, term) array.
    product = left @ matrices.transpose(1, 0, 2).reshape(q, points * p)
    # Everything after this runs along the draws of a point, which should lie side by side.
    return np.ascontiguousarray(np.einsum("spk,sk->ps", product.reshape(-1, points, p), right, optimize=True))


def joined(parts: list[Contrasts]) -> Contrasts:
    """Return the contrasts of several lists of points as those of one."""
    return Contrasts(
        a=np.concatenate([c.a for c in parts]),
        a_pure=np.concatenate([c.a_pure for c in parts]),
        b=np.concatenate([c.b for c in parts]),
        t=np.concatenate([c.t for c in parts]),
        kappa=parts[0].kappa,
    )


def chunks(total: int, size: int) -> Iterator[slice]:
    """Yield slices that cover ``range(total)`` in pieces of at most `size`."""
    for start in range(0, total, size):
        yield slice(start, min(total, start + size))
