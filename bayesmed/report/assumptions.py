"""What every conclusion takes for granted, and what a report is not."""

from bayesmed.study.observe import Observed


def assumptions(observed: Observed) -> tuple[str, ...]:
    """Return, a sentence or two each, what rho does not cover."""
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    return (
        f"Nothing unmeasured causes both {x} and {m}, or both {x} and {y}, given the other terms of the "
        "equations. A lot drawn well sees to that; in other studies it is an assumption.",
        f"Moderators and covariates came before {x} and are not changed by it.",
        f"No cause of both {m} and {y} is itself changed by {x}. rho stands for causes that {x} leaves alone.",
        f"What is left unexplained of {m} and {y} would be the same for a person under either value of {x}.",
        "One person's exposure does not touch another's outcome, and rows are independent.",
        "Both equations have the right form, and what they leave unexplained has the same spread "
        "throughout: one rho for all holds only then. The audit compares the spreads.",
        "What is left unexplained is taken to be normal. Effects rest on means and spreads and would stand "
        "without; intervals and probabilities lean on it.",
        f"The effect of {x} on {m} and that of {m} on {y} do not vary together from person to person beyond "
        "the moderators in the equations.",
        "Rows left out for missing values are like the others, given the columns used.",
        f"{m} was measured without error worth speaking of.",
    )


def randomisation(observed: Observed) -> tuple[str, ...]:
    """Return what drawing lots for the exposure gives, and what it does not."""
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    return (
        f"If {x} was drawn by lot, nothing unmeasured causes both {x} and {m}, or both {x} and {y}: the effect "
        f"of {x} on "
        f"{m} and the total effect on {y} need no further assumption of that kind. Whether it was, the software "
        f"cannot know.",
        f"Nobody draws lots for {m}. Its effect on {y} can be confounded in the best of trials, and with it the "
        f"indirect "
        "and the direct effect: that is what ρ is there for.",
    )


def beyond_rho(observed: Observed) -> tuple[str, ...]:
    """Return what may leave a correlation behind, or mislead, that no belief about rho repairs."""
    x, m, y = observed.exposure, observed.mediator_name, observed.outcome_name
    return (
        f"A cause of both {m} and {y} that {x} itself changes. ρ stands for causes that {x} leaves alone; with "
        f"one that it "
        "moves, indirect and direct effects as defined here are not what any ρ gives.",
        f"{m} measured with error: its path is pulled towards zero, which looks like a ρ and is none.",
        f"The reverse order, {y} moving {m}: the correlation it leaves has no fixed ρ that would undo it.",
        "Effects that vary between people: where those whose mediator moves more are also those in whom it "
        "matters more, "
        "what is left unexplained correlates without any confounder.",
        "One person's exposure reaching another's outcome.",
    )


CAUTIONS = (
    "This summary is for research. It is not medical advice and not a recommendation to treat, teach or fund "
    "anyone in any way.",
    "It does not replace an ethics review, a registered protocol or the rules of the place where the study "
    "was done; where they ask for something else, they come first.",
    "Decisions about people belong to those licensed to take them, who know more than a table does.",
    "A probability under a belief is no better than the belief. Say where yours comes from, and state it "
    "before you see the result.",
)
