"""Independent computations that several tests of this folder compare with."""

import itertools
import math

import scipy.integrate


def by_quadrature(prior, power):
    """E[r^power], by adaptive quadrature over r itself, not over ρ as the package does it."""
    lower, upper = prior.support()

    def weighted(t):  # r = sinh t: ρ = tanh t, dρ = dt/cosh²t
        rho = math.tanh(t)
        return math.sinh(t) ** power * float(prior.pdf(rho)) / math.cosh(t) ** 2

    ends = [max(math.atanh(max(lower, -1 + 1e-15)), -17), min(math.atanh(min(upper, 1 - 1e-15)), 17)]
    middle = [math.atanh(float(prior.ppf(q))) for q in (0.001, 0.1, 0.5, 0.9, 0.999)]
    edges = sorted({ends[0], *middle, ends[1]})
    return sum(
        scipy.integrate.quad(weighted, a, b, epsabs=1e-12, epsrel=1e-10, limit=400)[0]
        for a, b in itertools.pairwise(edges)
    )
