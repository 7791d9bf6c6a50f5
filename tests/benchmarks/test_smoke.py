"""The benchmark still runs and writes its page; what it measures is asserted nowhere."""

import sys
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import multivariate_normal


@pytest.fixture
def run(monkeypatch: pytest.MonkeyPatch):
    monkeypatch.syspath_prepend(str(Path(__file__).parent))
    import run

    yield run
    for name in ("run", "rival"):
        sys.modules.pop(name, None)


def test_a_part_yields_rows_with_times_and_ratios(run) -> None:
    (row,) = run.exact_against_numpy(quick=True)
    assert float(row.ours.split()[0]) >= 0
    assert float(row.ratio) > 0
    assert row.asked == "≤ 1.5"


def test_the_tables_go_between_the_marks_and_nothing_else_changes(run, tmp_path: Path) -> None:
    page = tmp_path / "performance.md"
    page.write_text(f"before\n{run.FIRST}\nold\n{run.LAST}\nafter\n", encoding="utf-8")
    row = run.at_most("what", 1.0, 2.0, 0.4)
    run.written(page, run.page([row], ["| grown |"]))
    text = page.read_text(encoding="utf-8")
    assert text.startswith("before\n")
    assert text.endswith("\nafter\n")
    assert "old" not in text
    assert "| what | 1.000 s | 2.000 s | 0.50 | ≤ 0.4 | no |" in text
    assert "numpy" in text


def test_the_rivals_likelihood_is_the_bivariate_normal_of_the_rows(run) -> None:
    """A rival that samples something else would be no rival; scipy's density of both residuals is the reference."""
    from rival import rival_model

    o = run.study(40, moderated=False).observed
    alpha, beta = np.array([0.1, 0.5, 0.3, 0.2]), np.array([0.0, 0.4, 0.2, 0.2, 0.1])
    sigma_m, sigma_y, rho = 1.1, 0.9, 0.35
    model = rival_model(o.mediator_design, o.outcome_design, o.mediator, o.outcome)
    share = (rho + 0.9) / 1.8
    point = {
        "alpha": alpha, "beta": beta, "sigma_m_log__": np.log(sigma_m), "sigma_y_log__": np.log(sigma_y),
        "share_interval__": np.log(share / (1 - share)),
    }  # fmt: skip
    e_m = o.mediator - o.mediator_design @ alpha
    e_y = o.outcome - o.outcome_design @ beta
    off = rho * sigma_m * sigma_y
    joint = multivariate_normal([0, 0], [[sigma_m**2, off], [off, sigma_y**2]])
    found = float(model.compile_logp(vars=model.observed_RVs)(point))
    assert found == pytest.approx(joint.logpdf(np.column_stack([e_m, e_y])).sum(), rel=1e-9)
