"""A whole report in its order, from findings and pictures, before it is written as a page or as Markdown."""

from typing import TYPE_CHECKING

from bayesmed.report.assumptions import CAUTIONS, assumptions, beyond_rho, randomisation
from bayesmed.report.blocks import Block, Bullets, Document, Figure, Section, Sub, said
from bayesmed.report.diagram import diagram
from bayesmed.report.findings import Findings
from bayesmed.report.method import again, diagnostics, how_it_was_done
from bayesmed.report.opening import answers, own_belief, question_and_answer
from bayesmed.report.overturning import overturning
from bayesmed.report.paragraphs import to_paste
from bayesmed.report.pictures import MAKERS
from bayesmed.report.standards import standards

if TYPE_CHECKING:
    from bayesmed.plots.picture import Picture


def document(findings: Findings, pictures: "dict[str, Picture]", kept: tuple[str, ...] = ()) -> Document:
    """Return the report.

    Parameters
    ----------
    findings : Findings
    pictures : dict of str to Picture
        Of ``bayesmed.report.pictures.drawn``.
    kept : tuple of str
        Sentences on what is kept of the participants' rows.
    """

    def figures(section: str) -> tuple[Figure, ...]:
        here = (maker for maker in MAKERS if maker.section == section and maker.name in pictures)
        return tuple(Figure(maker.name, maker.caption, pictures[maker.name].text) for maker in here)

    parts: tuple[tuple[str, str, tuple[Block, ...]], ...] = (
        ("question", "Question and answer", tuple(question_and_answer(findings))),
        ("own-belief", "Your own belief", tuple(own_belief(findings))),
        ("answers", "The answer under each belief", (*answers(findings), *figures("answers"))),
        (
            "overturning",
            "What rho stands for, and what would change the conclusion",
            tuple(overturning(findings, figures("overturning"))),
        ),
        ("paragraphs", "Paragraphs to paste", tuple(to_paste(findings))),
        ("assumptions", "What is taken for granted", _granted(findings)),
        ("method", "How it was done", tuple(how_it_was_done(findings))),
        ("diagnostics", "Diagnostics", tuple(diagnostics(findings, figures("diagnostics")))),
        ("standards", "Reporting standards, item by item", tuple(standards(findings))),
        ("cautions", "What this report is not", (Bullets(tuple((words,) for words in CAUTIONS)),)),
        ("again", "To make it again", tuple(again(findings, kept))),
    )
    return Document(findings.title, tuple(Section(*part) for part in parts))


def _granted(findings: Findings) -> tuple[Block, ...]:
    observed = findings.result.observed
    return (
        diagram(observed),
        Bullets(tuple((sentence,) for sentence in assumptions(observed))),
        Sub("What randomisation gives, and what it does not"),
        Bullets(tuple((sentence,) for sentence in randomisation(observed))),
        Sub("What rho stands for, and what it cannot"),
        said(
            f"ρ stands for causes of both {observed.mediator_name} and {observed.outcome_name} that were not "
            f"measured, that "
            f"{observed.exposure} leaves alone, and that act alike at all moderator values. It does not stand for:"
        ),
        Bullets(tuple((sentence,) for sentence in beyond_rho(observed))),
    )
