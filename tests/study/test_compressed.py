"""The one pass over the rows gives the inner products of whole designs, whatever the size of its chunks."""

import numpy as np
import pandas as pd
import pytest

from bayesmed.study import compressed, designs, observe

FORMULAS = {
    "mediator": "m ~ x * site + scale(z) + bs(age, df=4)",
    "outcome": "y ~ abs(m) + m * x + m:site + site + center(z) + bs(age, df=4) + C(grade)",
}


@pytest.fixture(scope="module")
def rows():
    random = np.random.default_rng(8)
    n = 900
    frame = pd.DataFrame(
        {
            "x": random.integers(0, 2, n),
            "z": random.normal(1e3, 2, n),
            "age": random.uniform(20, 60, n),
            # One level stands in the last rows alone, and one grade too, so that no early chunk has them.
            "site": np.where(np.arange(n) > 850, "c", random.choice(["a", "b"], n)),
            "grade": np.where(np.arange(n) > 880, 9, random.integers(1, 4, n)),
        }
    )
    frame["m"] = frame.x + random.normal(3, 1, n) * np.where(np.arange(n) > 800, -1, 1)
    frame["y"] = frame.m + random.normal(size=n)
    return frame


def seen(rows):
    return observe.observe(rows, exposure="x", contrast=(0, 1), **FORMULAS)


def test_chunks_and_one_piece_agree(rows, monkeypatch):
    whole = seen(rows)
    for module in (observe, compressed, designs):
        monkeypatch.setattr(module, "CHUNK", 128)
    pieces = seen(rows)
    assert pieces.outcome_terms == whole.outcome_terms
    np.testing.assert_allclose(pieces.mediator_design, whole.mediator_design, rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(pieces.outcome_design, whole.outcome_design, rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(pieces.alignment.terms, whole.alignment.terms, atol=1e-8)
    for each in (whole, pieces):
        v, w = each.mediator_design, each.outcome_design
        short_v, short_w = each.compressed.mediator_design, each.compressed.outcome_design
        scale = np.outer(np.linalg.norm(v, axis=0), np.linalg.norm(w, axis=0))
        np.testing.assert_allclose((short_v.T @ short_w) / scale, (v.T @ w) / scale, atol=1e-12)
        np.testing.assert_allclose(short_w.T @ each.compressed.mediator, w.T @ each.mediator, rtol=1e-10)
        assert each.compressed.outcome @ each.compressed.outcome == pytest.approx(each.outcome @ each.outcome)
