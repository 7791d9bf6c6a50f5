"""``bayesmed report``: from a study file to a printed comparison and a folder."""

from functools import partial
from pathlib import Path

from bayesmed.cli.printed import print_attention, print_comparison, print_words, screen, steps
from bayesmed.core.errors import BeliefNeededError
from bayesmed.fit.result import FitResult
from bayesmed.front.study import Study
from bayesmed.report.findings import find
from bayesmed.report.folder import check_folder, write_findings
from bayesmed.report.study_file import StudyFile, read_study_file
from bayesmed.study.points import points


def report(path: Path, folder: str, *, quiet: bool, rows: bool = True) -> int:
    """Fit a study, print the comparison of its beliefs, write the folder, and return the exit code."""
    with steps(quiet=quiet) as say:
        say("Reading the study and its data")
        asked = read_study_file(path)
        check_folder(folder)
        study = Study.of(asked.observe())
        # What the conclusions would refuse is better said before a fit than after it.
        points(study.observed, asked.at)
        say("Sampling" if asked.fit.method == "nuts" else "Drawing from the exact posterior")
        result = _fit(study, asked)
        say("Comparing beliefs")
        beliefs = asked.beliefs if asked.own_beliefs else None
        found = find(result, beliefs, asked.at, asked.claim, asked.ci_prob, asked.title)
    if not quiet:
        console = screen()
        print_attention(console, found.audit)
        print_comparison(console, found.comparison)
        for sentence in found.comparison.shifts:
            print_words(console, sentence)
    with steps(quiet=quiet) as say:
        say("Drawing the picture and writing the folder")
        written = write_findings(found, folder, rows=rows)
    if not quiet:
        names = ", ".join(sorted(each.name for each in written.iterdir() if not each.name.startswith(".")))
        print_words(console, f"\nWritten to {folder}: {names}")
    return 0


def _fit(study: Study, asked: StudyFile) -> FitResult:
    """Fit without a belief, or, where rho is informed and the fit needs one, under the widest of those given."""
    fit = partial(
        study.fit,
        method=asked.fit.method,
        draws=asked.fit.draws,
        tune=asked.fit.tune,
        chains=asked.fit.chains,
        random_seed=asked.fit.random_seed,
        coefficients=asked.coefficients,
        learn=asked.fit.learn,
        progressbar=False,
    )
    try:
        return fit().result
    except BeliefNeededError:
        return fit(max(asked.beliefs.values(), key=lambda belief: belief.rho_sd())).result
