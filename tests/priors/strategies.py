"""Hypothesis strategies for beliefs, shared by the tests of this folder."""

from hypothesis import settings
from hypothesis import strategies as st

from bayesmed.priors import LKJ, FisherNormal, StretchedBeta, TruncatedNormal, Uniform

quick = settings(max_examples=30, deadline=None, derandomize=True, database=None)


def numbers(lower, upper):
    return st.floats(lower, upper, allow_nan=False, allow_infinity=False)


@st.composite
def bounds(draw, limit=1.0):
    first = draw(numbers(-limit, limit))
    second = draw(numbers(-limit, limit).filter(lambda value: abs(value - first) > 1e-3))
    return min(first, second), max(first, second)


@st.composite
def truncated_normals(draw):
    lower, upper = draw(bounds())
    mean = lower + draw(numbers(0, 1)) * (upper - lower)
    return TruncatedNormal(min(max(mean, lower), upper), draw(numbers(0.01, 30)), lower, upper)


uniforms = bounds().map(lambda pair: Uniform(*pair))
stretched_betas = st.builds(StretchedBeta, numbers(0.3, 60), numbers(0.3, 60))
fisher_normals = st.builds(FisherNormal, numbers(-2, 2), numbers(0.02, 1.5))
lkjs = st.builds(LKJ, numbers(0.3, 80))
continuous = st.one_of(uniforms, truncated_normals(), stretched_betas, fisher_normals, lkjs)
probabilities = numbers(0.001, 0.999)
