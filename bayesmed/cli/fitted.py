"""From a study file to the answer under each of its beliefs: what ``report`` and ``compare`` have in common."""

from collections.abc import Callable
from functools import partial
from pathlib import Path

from bayesmed.core.errors import BeliefNeededError
from bayesmed.fit.make import fit_study
from bayesmed.fit.result import FitResult
from bayesmed.report.findings import Answer, answer
from bayesmed.report.study_file import StudyFile, read_study_file
from bayesmed.study.observe import Observed
from bayesmed.study.points import points


def fitted(path: Path, say: Callable[[str], None]) -> Answer:
    """Read a study file, fit the study and compare its beliefs, saying what is being done."""
    say("Reading the study and its data")
    asked = read_study_file(path)
    observed = asked.observe()
    # What the conclusions would refuse is better said before a fit than after it.
    points(observed, asked.at)
    say("Sampling" if asked.fit.method == "nuts" else "Drawing from the exact posterior")
    result = _fit(observed, asked)
    say("Comparing beliefs")
    beliefs = asked.beliefs if asked.own_beliefs else None
    return answer(result, beliefs, asked.at, asked.claim, asked.ci_prob, asked.title)


def _fit(observed: Observed, asked: StudyFile) -> FitResult:
    """Fit without a belief, or, where rho is informed and the fit needs one, under the widest of those given."""
    fit = partial(
        fit_study,
        observed,
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
        return fit(rho=None)
    except BeliefNeededError:
        return fit(rho=max(asked.beliefs.values(), key=lambda belief: belief.rho_sd()))
