"""Several beliefs about the correlation side by side: table, verdicts, and which belief changes which."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.conclusions.claim import CLOSE, HOLDS, Claim, as_claim
from bayesmed.conclusions.summary import checked_width, stacked
from bayesmed.conclusions.view import View, view
from bayesmed.conclusions.words import listed, point_text, probability_text
from bayesmed.core.errors import ArgumentError
from bayesmed.fit.result import FitResult
from bayesmed.priors.by_group import ByGroup, as_belief
from bayesmed.study.points import Points, points


@dataclass(frozen=True, eq=False)
class ComparisonResult:
    """Beliefs compared on the same draws.

    Attributes
    ----------
    table : pandas.DataFrame
        Long: prior, effect, moderators, mean, sd, lower, upper, probability, mcse, verdict. The verdict is given
        for the claim's effect and blank for the others, whose probability is of the same limit.
    beliefs : dict of str to prior
    claim : Claim
    points : Points
    views : dict of str to View
        The fit as seen under each belief.
    """

    result: FitResult
    table: pd.DataFrame
    beliefs: dict[str, Any]
    claim: Claim
    points: Points
    ci_prob: float
    views: dict[str, View]

    @property
    def routes(self) -> dict[str, str]:
        """How each belief was brought to draws in which rho is informed; empty where one set of draws serves all."""
        return {label: seen.route for label, seen in self.views.items() if seen.route}

    @cached_property
    def rho(self) -> pd.DataFrame:
        """Mean and SD of rho before and after the data: prior, group if beliefs differ by group, and four numbers."""
        rows = [row for label, belief in self.beliefs.items() for row in _moved(label, belief, self.views[label])]
        found = pd.DataFrame(rows)
        return found.drop(columns="group") if found["group"].isna().all() else found

    @cached_property
    def claimed(self) -> pd.DataFrame:
        """The rows of the claim's effect."""
        return self.table[self.table["effect"] == self.claim.effect].reset_index(drop=True)

    @cached_property
    def shifts(self) -> tuple[str, ...]:
        """Sentences saying which belief changes which subgroup's verdict, the first belief being the reference."""
        reference = next(iter(self.beliefs))
        sentences = []
        for k, point in enumerate(self.points.values):
            rows = self.claimed.iloc[k :: len(self.points.values)].set_index("prior")
            sentences.append(_shift(rows, reference, point_text(point)))
        return tuple(sentences)


def compare(
    result: FitResult,
    beliefs: Mapping[str, Any],
    at: Any = None,
    claim: Claim | None = None,
    ci_prob: float = 0.95,
) -> ComparisonResult:
    """Compare beliefs; see ``Fit.compare``."""
    if not isinstance(beliefs, Mapping) or not beliefs:
        raise ArgumentError(
            f"compare: expected a dict of label → prior, for example "
            f"{{'no confounding': 0.0, 'wide': bm.Uniform(-0.5, 0.5)}}; found {beliefs!r}"
        )
    for label in beliefs:
        if not isinstance(label, str) or not label.strip():
            raise ArgumentError(f"compare: label {label!r} must be text that is not blank")
    accepted = {label: as_belief(prior) for label, prior in beliefs.items()}
    chosen, stated, width = points(result.observed, at), as_claim(claim), checked_width(ci_prob)
    views = {}
    for label, belief in accepted.items():
        seen = views[label] = view(result, chosen, belief)
        if stated.effect not in seen.contrasts.effects:
            raise ArgumentError(
                f"claim: the {stated.effect!r} effect equals the "
                f"{'indirect' if 'indirect' in stated.effect else 'direct'!r} effect here, since the outcome "
                "equation has no term of exposure with mediator; claim that one instead"
            )
    joined = stacked(list(views.values()), chosen, stated, width)
    joined.insert(0, "prior", np.repeat(np.array(list(views), dtype=object), len(joined) // len(views)))
    judged = zip(joined["effect"], joined["probability"], joined["mcse"], strict=True)
    joined["verdict"] = [stated.verdict(p, e) if effect == stated.effect else "" for effect, p, e in judged]
    return ComparisonResult(result, joined, accepted, stated, chosen, width, views)


def _moved(label: str, belief: Any, seen: View) -> Iterator[dict[str, Any]]:
    """Yield the prior's and the posterior's mean and SD of rho, once or once a group."""
    for group, prior in belief.items if isinstance(belief, ByGroup) else ((None, belief),):
        mean, sd = prior.rho_mean(), prior.rho_sd()
        before = {"prior": label, "group": group, "prior_mean": mean, "prior_sd": sd}
        if seen.rho is not None and seen.result.settings.learn:
            mean = float(np.average(seen.rho, weights=seen.weights))
            sd = float(np.sqrt(np.average((seen.rho - mean) ** 2, weights=seen.weights)))
        yield {**before, "posterior_mean": mean, "posterior_sd": sd}


def _shift(rows: pd.DataFrame, reference: str, where: str) -> str:
    """Return the sentence about one moderator point."""
    verdicts = dict(zip(rows.index, rows["verdict"], strict=True))
    probabilities = dict(zip(rows.index, rows["probability"], strict=True))
    errors = dict(zip(rows.index, rows["mcse"], strict=True))

    def shown(label: str) -> str:
        return f"“{label}” ({probability_text(probabilities[label], errors[label])})"

    def having(verdict: str) -> list[str]:
        return [label for label, found in verdicts.items() if found == verdict]

    start = f"At {where}" if where != "averaged over all rows" else "Averaged over all rows"
    same = verdicts[reference]
    others = list(dict.fromkeys(verdict for verdict in verdicts.values() if verdict != same))
    if not others:
        lowest, highest = min(verdicts, key=probabilities.__getitem__), max(verdicts, key=probabilities.__getitem__)
        span = f"goes from {shown(lowest)} to {shown(highest)}" if lowest != highest else f"is {shown(lowest)}"
        return f"{start} the claim {_phrase(same)} under every belief: the probability {span}."
    agreeing = [shown(label) for label in having(same) if label != reference]
    also = f", as under {listed(agreeing)}" if agreeing else ""
    changed = " and ".join(f"{_phrase(v)} under {listed(shown(label) for label in having(v))}" for v in others)
    return f"{start} the claim {_phrase(same)} under {shown(reference)}{also}; it {changed}."


def _phrase(verdict: str) -> str:
    return "is too close to call" if verdict == CLOSE else ("holds" if verdict == HOLDS else "fails")
