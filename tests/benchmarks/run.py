"""Measure what speed was promised, beside rivals in the same run, and print it as Markdown.

    python tests/benchmarks/run.py [--quick] [--write docs/performance.md]

Times are medians over alternations of ours and the rival's. With --write, what stands between the two marks of the page
is replaced, and the rest, written by hand, stays.
"""

import argparse
import platform
import re
import subprocess
import sys
import tempfile
import time
import tracemalloc
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib.metadata import version
from os import cpu_count
from pathlib import Path

import numpy as np
import nutpie
import pandas as pd
from arviz_stats.base import array_stats
from rival import compiled_rival

import bayesmed as bm
from bayesmed.core.regression import exact_draws
from bayesmed.fit import shared
from bayesmed.fit.result import Settings
from bayesmed.fit.statistics import reduce_study

HERE = Path(__file__).parent
ROOT = HERE.parent.parent
VALUES = np.linspace(-2, 2, 21).tolist()
BELIEFS = {
    "uniform .3": bm.Uniform(-0.3, 0.3),
    "uniform 0 to .5": bm.Uniform(0, 0.5),
    "LKJ": bm.LKJ(2),
    "normal": bm.TruncatedNormal(0.25, 0.15),
    "beta": bm.StretchedBeta(3, 4),
    "Fisher": bm.FisherNormal(0, 0.3),
    "mixture": bm.Mixture([bm.Uniform(-0.3, 0.3), bm.LKJ(2)], [0.5, 0.5]),
    "uniform .9": bm.Uniform(-0.9, 0.9),
}
FIRST, LAST = "<!-- measured: begin -->", "<!-- measured: end -->"


@dataclass(frozen=True)
class Row:
    """One line of the table."""

    what: str
    ours: str
    rival: str
    ratio: str
    asked: str
    met: bool


def rows(count: int, seed: int, terms: int = 3) -> pd.DataFrame:
    """Invented rows with a randomised exposure, a moderator and covariates c0, c1, …."""
    random = np.random.default_rng(seed)
    covariates = {f"c{k}": random.normal(size=count) for k in range(terms)}
    z, x = random.normal(size=count), np.arange(count) % 2
    m = 0.5 * x + 0.3 * z + 0.2 * covariates["c0"] + random.normal(size=count)
    y = 0.4 * m + 0.3 * m * z + 0.2 * x + 0.1 * covariates["c0"] + 0.2 * z + random.normal(size=count)
    return pd.DataFrame({"x": x, "z": z, **covariates, "m": m, "y": y})


def study(count: int, seed: int = 1, terms: int = 1, moderated: bool = True) -> bm.Study:
    """A study of invented rows."""
    beside = " + ".join(f"c{k}" for k in range(terms))
    product = "m * z" if moderated else "m + z"
    data = rows(count, seed, terms)
    return bm.Study(data, exposure="x", mediator=f"m ~ x + z + {beside}", outcome=f"y ~ {product} + x + {beside}")


def seconds(action: Callable[[], object]) -> float:
    """Return how long an action takes."""
    start = time.perf_counter()
    action()
    return time.perf_counter() - start


def alternated(ours: Callable[[], object], rival: Callable[[], object], times: int) -> tuple[float, float]:
    """Return the median times of both, taken in turns, after one of each that does not count."""
    ours(), rival()
    pairs = [(seconds(ours), seconds(rival)) for _ in range(times)]
    mine, theirs = np.median(pairs, axis=0)
    return float(mine), float(theirs)


def at_most(what: str, mine: float, theirs: float, most: float) -> Row:
    """Return a row for a time that must not exceed a multiple of the rival's."""
    ratio = mine / theirs
    return Row(what, f"{mine:.3f} s", f"{theirs:.3f} s", f"{ratio:.2f}", f"≤ {most:g}", ratio <= most)


def beliefs_against_resampling(quick: bool) -> Iterator[Row]:
    """Every belief after one fit, against sampling again for each belief and each rho."""
    asked = study(240)
    fit = asked.fit(method="exact", draws=1000, chains=4, random_seed=1, progressbar=False)
    at = {"z": VALUES}
    o = asked.observed
    compiled = compiled_rival(o.mediator_design, o.outcome_design, o.mediator, o.outcome)
    # The rival's model knows uniform beliefs: each of ours stands for one of about its width, and rho for a point.
    bounds = [(-0.3, 0.6), (0.0, 0.5), (-0.9, 1.8), (0.0, 0.5), (-0.9, 1.8), (-0.6, 1.2), (-0.9, 1.8), (-0.9, 1.8)]
    bounds += [(0.1 * k, 1e-6) for k in range(-9, 10)]

    def again() -> None:
        for lower, width in bounds:
            moved = compiled.with_data(rho_lower=lower, rho_width=width)
            nutpie.sample(moved, draws=1000, tune=1000, chains=4, seed=1, progress_bar=False)

    def ours() -> None:
        fresh = bm.Fit(fit.result.replaced())
        fresh.compare(BELIEFS, at=at)
        fresh.rho_grid(at=at)

    mine, theirs = alternated(ours, again, 3 if quick else 5)
    ratio = theirs / mine
    what = "`compare` with 8 priors and `rho_grid` at 19 ρ, 21 moderator values, 4,000 draws, all effects"
    yield Row(what, f"{mine:.3f} s", f"27 samplings, {theirs:.2f} s", f"{ratio:.0f} × faster", "≥ 100 ×", ratio >= 100)
    families = {"mean": np.linspace(-0.5, 0.5, 60), "sd": np.linspace(0.02, 0.4, 60)}
    mapped = float(np.median([seconds(lambda: fit.prior_map(at=at, **families)) for _ in range(3)]))
    yield Row("`prior_map`, 60 × 60 × 21", f"{mapped:.3f} s", "–", "–", "≤ 0.3 s", mapped <= 0.3)
    p = bm.priors
    doubts = p.Statements(
        p.Probability(above=0.3, at_most=0.1), p.Probability(below=-0.3, at_most=0.1), p.Mean(-0.1, 0.2),
        p.Probability(above=0.0, at_least=0.3), p.Quantile(0.5, -0.1, 0.1), lower=-0.9, upper=0.9,
    )  # fmt: skip
    enclosed = float(np.median([seconds(lambda: fit.envelope(doubts, at=at)) for _ in range(3)]))
    yield Row("`envelope`, 5 statements × 21", f"{enclosed:.3f} s", "–", "–", "≤ 0.5 s", enclosed <= 0.5)


def effective_draws_a_second(quick: bool) -> Iterator[Row]:
    """The indirect effect under rho uniform on ±.9, sampling only."""
    for count, least, draws in ((240, 30, 1000), (200_000, 1000, 60)):
        if quick and count > 1000:
            continue
        asked = study(count, moderated=False)
        o, statistics = asked.observed, reduce_study(asked.observed)
        terms = o.mediator_terms, o.outcome_terms
        compiled = compiled_rival(o.mediator_design, o.outcome_design, o.mediator, o.outcome)
        place_m, place_x = o.outcome_terms.index("m"), o.mediator_terms.index("x")
        asked.fit(random_seed=1, draws=50, tune=50, progressbar=False)
        rates: tuple[list[float], list[float]] = ([], [])
        for seed in range(1 if count > 1000 else 3):
            settings = Settings("nuts", 1000, 1000, 4, seed, True)
            start = time.perf_counter()
            tree = shared.sample_shared(statistics, *terms, settings, False)
            took = time.perf_counter() - start
            fit = asked.adopt(tree, rho="unidentified")
            effect = fit.effects(at={}, rho=bm.Uniform(-0.9, 0.9))["indirect"].to_numpy()
            rates[0].append(float(array_stats.ess(effect, chain_axis=0, draw_axis=1)) / took)
            start = time.perf_counter()
            found = nutpie.sample(compiled, draws=draws, tune=draws, chains=4, seed=seed, progress_bar=False)
            took = time.perf_counter() - start
            posterior = found["posterior"]
            product = posterior["alpha"].to_numpy()[..., place_x] * posterior["beta"].to_numpy()[..., place_m]
            rates[1].append(float(array_stats.ess(product, chain_axis=0, draw_axis=1)) / took)
        mine, theirs = (float(np.median(r)) for r in rates)
        beside = "" if draws == 1000 else f" (the rival with {draws} draws a chain after as many to adapt)"
        what = f"effective draws a second of the indirect effect, free ρ, {count:,} rows{beside}"
        yield Row(
            what, f"{mine:,.0f}", f"{theirs:,.2f}", f"{mine / theirs:,.0f} ×", f"≥ {least:,} ×", mine / theirs >= least
        )


def many_rows(quick: bool) -> Iterator[Row]:
    """A million rows against a thousand, and the one pass over them against building two matrices."""
    import formulaic

    count = 100_000 if quick else 1_000_000
    data = rows(count, 3, terms=9)
    beside = " + ".join(f"c{k}" for k in range(9))
    right = f"x + z + {beside}", f"m + x + z + {beside}"
    roles = {"exposure": "x", "mediator": f"m ~ {right[0]}", "outcome": f"y ~ {right[1]}"}

    def by_hand() -> None:
        for side, response in zip(right, ("m", "y"), strict=True):
            design = formulaic.model_matrix(side, data, output="numpy")
            np.linalg.qr(np.column_stack([design, data[response]]), mode="r")

    mine, theirs = alternated(lambda: bm.Study(data, **roles), by_hand, 3 if quick else 7)
    yield at_most(f"design matrices and sufficient statistics, {count:,} rows × 12 terms", mine, theirs, 1)
    tracemalloc.start()
    large = bm.Study(data, **roles)
    peak = tracemalloc.get_traced_memory()[1] / 1e6
    tracemalloc.stop()
    one = count * 12 * 8 / 1e6
    frame = data.memory_usage(index=False).sum() / 1e6
    what = f"peak memory of that pass beyond the copy of the columns used ({frame:.0f} MB)"
    yield Row(
        what,
        f"{peak - frame:.0f} MB",
        f"one design, {one:.0f} MB",
        f"{(peak - frame) / one:.2f}",
        "≤ 1",
        peak - frame <= one,
    )
    small = bm.Study(data.iloc[:1000], **roles)
    for method in ("exact", "nuts"):
        options = {"method": method, "random_seed": 1, "progressbar": False}
        mine, theirs = alternated(lambda o=options: large.fit(**o), lambda o=options: small.fit(**o), 5)
        yield at_most(f"fit ({method}) at {count:,} rows against 1,000, the pass left out", mine, theirs, 1.3)
    fits = [asked.fit(method="exact", random_seed=1, progressbar=False) for asked in (large, small)]

    def effects(fit: bm.Fit) -> None:
        bm.Fit(fit.result.replaced()).effects(at={"z": VALUES}, rho=0.1)

    mine, theirs = alternated(lambda: effects(fits[0]), lambda: effects(fits[1]), 9)
    yield at_most(f"effects at 21 values, {count:,} rows against 1,000", mine, theirs, 1.5)


def second_study(quick: bool) -> Iterator[Row]:
    """Another study in the same process, in a process of its own so that the first fit is the first."""
    code = """
import sys, time
sys.path.insert(0, sys.argv[1])
from run import seconds, study
first = seconds(lambda: study(240).fit(random_seed=1, progressbar=False))
quiet = {"random_seed": 1, "progressbar": False}
others = [study(300, 2, terms=k, moderated=False) for k in (2, 3, 4)]
print(first, sorted(seconds(lambda other=other: other.fit(**quiet)) for other in others)[1])
"""
    printed = subprocess.run([sys.executable, "-c", code, str(HERE)], capture_output=True, text=True, check=True)
    first, other = map(float, printed.stdout.split())
    met = other <= 0.3 and other <= first / 8
    yield Row(
        "second study, other data and terms",
        f"{other:.3f} s",
        f"first {first:.2f} s",
        f"{other / first:.3f}",
        "≤ 0.3 s, ≤ 1/8",
        met,
    )


def fresh_processes(quick: bool) -> Iterator[Row]:
    """From nothing to a printed table, and imports."""
    bare = """
import nutpie, pymc as pm
with pm.Model() as model:
    mu, sigma = pm.Normal("mu"), pm.HalfNormal("sigma")
    pm.Normal("y", mu, sigma, observed=[0.1, -0.3, 0.8])
nutpie.sample(nutpie.compile_pymc_model(model), draws=1000, tune=1000, chains=4, seed=1, progress_bar=False)
"""
    printed = """
import sys
import bayesmed.cli.report as room
from bayesmed.cli import main
def stop(first):
    raise SystemExit(0)
room.completed = stop
main(["report", sys.argv[1], "--out", sys.argv[2]])
"""
    example = ROOT / "bayesmed" / "examples" / "knee_rehab" / "study.toml"
    with tempfile.TemporaryDirectory() as folder:
        exact = Path(folder) / "study.toml"
        text = example.read_text(encoding="utf-8").replace('method = "nuts"', 'method = "exact"')
        data = example.parent / "knee_rehab.csv"
        exact.write_text(text.replace('"knee_rehab.csv"', f'"{data}"'), encoding="utf-8")
        assert 'method = "exact"' in text, "the example no longer says its method"

        def process(code: str, *arguments: object) -> Callable[[], object]:
            command = [sys.executable, "-c", code, *map(str, arguments)]
            return lambda: subprocess.run(command, capture_output=True, check=True)

        times = 3 if quick else 5
        out = Path(folder) / "out"
        mine, theirs = alternated(process(printed, example, out), process(bare), times)
        yield at_most("fresh process to a printed table, NUTS, against a bare two-parameter model", mine, theirs, 1.25)
        mine, theirs = alternated(process(printed, exact, out), process("import pandas, scipy.stats, formulaic"), times)
        yield at_most("fresh process to a printed table, exact, against importing the libraries", mine, theirs, 1.3)
        nothing = min(seconds(process("pass")) for _ in range(5))
        mine, theirs = alternated(process("import bayesmed"), process("import numpy"), 2 * times)
        yield at_most(
            "`import bayesmed` against `import numpy`, Python's own start left out",
            mine - nothing,
            theirs - nothing,
            0.5,
        )
        mine, theirs = alternated(
            process("import bayesmed; bayesmed.Study"), process("import pandas, scipy.stats, formulaic"), 2 * times
        )
        yield at_most("first touch of `bm.Study` against importing the libraries", mine, theirs, 1.1)


def exact_against_numpy(quick: bool) -> Iterator[Row]:
    """The core function for exact draws against the same draws by hand."""
    regression = reduce_study(study(240).observed).outcome
    p, df = regression.terms, regression.degrees_of_freedom

    def by_hand() -> None:
        random = np.random.default_rng(1)
        factor = regression.factor[:p, :p]
        middle = np.linalg.solve(factor, regression.factor[:p, p])
        sigma = np.sqrt(regression.factor[p, p] ** 2 / random.chisquare(df, 4000))
        middle + (np.linalg.solve(factor, random.standard_normal((p, 4000))) * sigma).T

    mine, theirs = alternated(lambda: exact_draws(regression, 4000, np.random.default_rng(1)), by_hand, 101)
    yield at_most("4,000 exact draws against numpy by hand", mine, theirs, 1.5)


def growth(quick: bool) -> Iterator[str]:
    """Yield a table of how the time of each step grows, with the slope of log time on log size."""
    fit = study(240).fit(method="exact", random_seed=1, progressbar=False)

    def compared(points: int, beliefs: int, draws: int = 1000) -> Callable[[], object]:
        chosen = dict(list(BELIEFS.items())[:beliefs])
        made = fit if draws == 1000 else study(240).fit(method="exact", draws=draws, random_seed=1, progressbar=False)
        at = {"z": np.linspace(-2, 2, points).tolist()}
        return lambda: bm.Fit(made.result.replaced()).compare(chosen, at=at)

    def studied(count: int, terms: int) -> Callable[[], object]:
        data = rows(count, 1, terms)
        beside = " + ".join(f"c{k}" for k in range(terms))
        return lambda: bm.Study(data, exposure="x", mediator=f"m ~ x + {beside}", outcome=f"y ~ m + x + {beside}")

    series: dict[str, tuple[list[int], Callable[[int], Callable[[], object]]]] = {
        "rows (the study, 4 terms)": ([1000, 10_000, 100_000], lambda n: studied(n, 4)),
        "terms (the study, 20,000 rows)": ([4, 8, 16, 32], lambda n: studied(20_000, n)),
        "moderator values (`compare`, 4 beliefs)": ([5, 20, 80], lambda n: compared(n, 4)),
        "beliefs (`compare`, 21 values)": ([1, 2, 4, 8], lambda n: compared(21, n)),
        "draws a chain (`compare`, 4 beliefs, 5 values)": ([250, 1000, 4000], lambda n: compared(5, 4, n)),
    }
    yield "| what grows | sizes | seconds | slope |"
    yield "|---|---|---|---|"
    for name, (sizes, make) in series.items():
        times = []
        for size in sizes:
            action = make(size)
            action()
            times.append(float(np.median([seconds(action) for _ in range(3)])))
        slope = np.polyfit(np.log(sizes), np.log(times), 1)[0]
        shown = ", ".join(f"{size:,}" for size in sizes), ", ".join(f"{took:.3f}" for took in times)
        yield f"| {name} | {shown[0]} | {shown[1]} | {slope:.2f} |"


def page(found: list[Row], grown: list[str]) -> str:
    """Return tables and machine as Markdown."""
    lines = ["| what | ours | rival or limit | ratio | asked | met |", "|---|---|---|---|---|---|"]
    lines += [
        f"| {r.what} | {r.ours} | {r.rival} | {r.ratio} | {r.asked} | {'yes' if r.met else 'no'} |" for r in found
    ]
    names = ", ".join(f"{name} {version(name)}" for name in ("numpy", "scipy", "pandas", "formulaic", "pymc", "nutpie"))
    machine = f"{platform.machine()}, {cpu_count()} cores, Python {platform.python_version()}, {names}"
    return "\n".join([*lines, "", *grown, "", f"Machine: {machine}."])


def written(path: Path, found: str) -> None:
    """Put the tables between the marks of a page."""
    text = path.read_text(encoding="utf-8")
    pattern = re.compile(f"{re.escape(FIRST)}.*{re.escape(LAST)}", re.DOTALL)
    assert pattern.search(text), f"{path} lacks the marks {FIRST} and {LAST}"
    path.write_text(pattern.sub(lambda _: f"{FIRST}\n{found}\n{LAST}", text), encoding="utf-8")


PARTS = (
    beliefs_against_resampling,
    effective_draws_a_second,
    many_rows,
    second_study,
    fresh_processes,
    exact_against_numpy,
)

if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--quick", action="store_true", help="fewer alternations, 100,000 rows in place of a million")
    parser.add_argument("--write", type=Path, help="the page to put the tables into")
    options = parser.parse_args()
    table: list[Row] = []
    for part in PARTS:
        for line in part(options.quick):
            table.append(line)
            print(
                f"{line.what}: {line.ours}, {line.rival}, {line.ratio} (asked {line.asked})",
                file=sys.stderr,
                flush=True,
            )
    tables = page(table, list(growth(options.quick)))
    print(tables)
    if options.write:
        written(options.write, tables)
