"""The demo trial end to end, and the package installed from its wheel."""

import os
import subprocess
import sys
from pathlib import Path

import numpy as np

import bayesmed as bm

CHECKOUT = Path(__file__).parents[2]


def test_the_sampler_does_well_on_the_demo():
    from arviz_stats.base import array_stats

    study = bm.Study(
        bm.load_example("knee_rehab"),
        exposure="coaching",
        mediator="exercise ~ coaching + confidence + age + body_mass_index",
        outcome="function ~ exercise * confidence + coaching + age + body_mass_index",
    )
    fit = study.fit(rho=bm.Uniform(-0.9, 0.9), random_seed=1, progressbar=False)
    assert int(fit.tree["sample_stats"]["diverging"].sum()) == 0
    draws = fit.effects(at={"confidence": [4, 8]})["indirect"].transpose("confidence", "chain", "draw").to_numpy()
    ess = array_stats.ess(draws, chain_axis=1, draw_axis=2, method="bulk")
    assert np.all(ess >= 2000)


def test_a_wheel_works_outside_the_checkout(tmp_path):
    quiet = {"check": True, "capture_output": True, "text": True}
    pip = [sys.executable, "-m", "pip", "--disable-pip-version-check"]
    site = tmp_path / "site"
    build = ["wheel", "--no-deps", "--no-build-isolation", "-w", tmp_path, CHECKOUT]
    subprocess.run([*pip, *map(str, build)], **quiet)
    (wheel,) = tmp_path.glob("bayesmed-*.whl")
    subprocess.run([*pip, "install", "--no-deps", "--target", str(site), str(wheel)], **quiet)
    environment = {**os.environ, "PYTHONPATH": str(site)}
    where = subprocess.run(
        [sys.executable, "-c", "import bayesmed; print(bayesmed.__file__)"], cwd=tmp_path, env=environment, **quiet
    )
    assert Path(where.stdout.strip()).is_relative_to(site)
    out = tmp_path / "out"
    study = site / "bayesmed" / "examples" / "knee_rehab" / "study.toml"
    text = study.read_text(encoding="utf-8").replace('method = "nuts"', 'method = "exact"').replace("tune = 1000\n", "")
    study.write_text(text, encoding="utf-8")
    command = [sys.executable, "-m", "bayesmed", "report", str(study), "--out", str(out)]
    printed = subprocess.run(command, cwd=tmp_path, env=environment, **quiet)
    assert "drive helps both" in printed.stdout
    assert (out / "report.md").is_file()


def test_importing_costs_next_to_nothing():
    code = "import sys, bayesmed; print([m for m in ('numpy', 'pandas', 'scipy', 'pymc') if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
    assert done.stdout.strip() == "[]"


def test_an_exact_fit_imports_neither_pymc_nor_arviz():
    code = (
        "import sys, bayesmed as bm\n"
        "s = bm.Study(bm.load_example('knee_rehab'), exposure='coaching', mediator='exercise ~ coaching + age',"
        " outcome='function ~ exercise + coaching + age')\n"
        "print(s.fit(method='exact', progressbar=False).compare(bm.priors.panel(), at={}))\n"
        "heavy = {'pymc', 'pytensor', 'nutpie', 'arviz_stats', 'arviz_plots', 'matplotlib'} & set(sys.modules)\n"
        "assert not heavy, heavy"
    )
    subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
