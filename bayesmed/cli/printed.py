"""What the command prints: steps to standard error, tables to standard output, nothing cut short."""

import sys
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from textwrap import wrap
from typing import TYPE_CHECKING

from bayesmed.conclusions.comparison import ComparisonResult
from bayesmed.conclusions.words import harmless, number_text, point_text, probability_text
from bayesmed.study.audit import Audit
from bayesmed.study.findings import Finding

if TYPE_CHECKING:
    from rich.console import Console
    from rich.progress import Progress

WIDTH = 80
"""Columns where there is no terminal to ask, and the least there is."""


def screen() -> "Console":
    """Return a console on standard output: as wide as the terminal, or 80 columns into a file or a pipe."""
    from rich.console import Console

    console = Console()
    return Console(width=max(console.width, WIDTH) if console.is_terminal else WIDTH)


@contextmanager
def steps(*, quiet: bool) -> Iterator[Callable[[str], None]]:
    """Show what is being done: a turning mark with the time taken in a terminal, a line each elsewhere."""
    if quiet:
        yield lambda _: None
        return
    if not sys.stderr.isatty():
        yield lambda words: print(f"{words} …", file=sys.stderr, flush=True)
        return
    from rich.console import Console
    from rich.progress import Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

    columns = (SpinnerColumn(finished_text="✓"), TextColumn("{task.description}"), TimeElapsedColumn())
    with Progress(*columns, console=Console(stderr=True)) as progress:

        def say(words: str) -> None:
            _finish(progress)
            progress.add_task(words, total=1)

        yield say
        _finish(progress)


def print_answer(console: "Console", audit: Audit, comparison: ComparisonResult) -> None:
    """Print what deserves attention, the comparison of beliefs, and which belief changes what."""
    print_attention(console, audit)
    print_comparison(console, comparison)
    for sentence in comparison.shifts:
        print_words(console, sentence)


def print_comparison(console: "Console", comparison: ComparisonResult) -> None:
    """Print the claim's effect under every belief, one table a moderator point."""
    from rich.table import Table
    from rich.text import Text

    claim, count = comparison.claim, len(comparison.points.values)
    print_words(
        console,
        f"Claim: {claim}, held to require a probability of {claim.required:g}. Intervals hold "
        f"{100 * comparison.ci_prob:g} %; MC error is the Monte Carlo error of the probability.",
    )
    for k, point in enumerate(comparison.points.values):
        table = Table(box=None, pad_edge=False, header_style="", padding=(0, 2, 0, 0))
        table.add_column("belief about rho", overflow="fold")
        for head in ("mean", "interval", "probability", "MC error"):
            table.add_column(head, justify="right", no_wrap=True)
        table.add_column("claim", no_wrap=True)
        for _, row in comparison.claimed.iloc[k::count].iterrows():
            cells = (
                str(row["prior"]),
                number_text(row["mean"]),
                f"{number_text(row['lower'])} to {number_text(row['upper'])}",
                probability_text(row["probability"], row["mcse"]),
                f"{row['mcse']:.0e}" if 0 < row["mcse"] < 0.001 else f"{row['mcse']:.3f}",
                str(row["verdict"]),
            )
            table.add_row(*(Text(harmless(" ".join(cell.split()))) for cell in cells))
        print_words(console, "")
        print_heading(console, point_text(point))
        console.print(table)
    print_words(console, "")


def print_attention(console: "Console", audit: Audit) -> None:
    """Print the findings of the audit that deserve attention, if any do."""
    marked = [finding for finding in audit.findings if finding.level != "note"]
    _print_findings(console, marked)
    if marked:
        print_words(console, "")


def print_audit(console: "Console", audit: Audit) -> None:
    """Print every finding of the audit."""
    _print_findings(console, audit.findings)


def print_words(console: "Console", words: str, indent: str = "") -> None:
    """Print words as they are, wrapped between words, the lines after the first behind `indent`."""
    for paragraph in harmless(words).split("\n"):
        lines = wrap(paragraph, console.width, subsequent_indent=indent, break_long_words=False) or [""]
        print("\n".join(lines))


def print_heading(console: "Console", words: str) -> None:
    """Print words, in bold where there is a terminal."""
    from rich.text import Text

    for line in wrap(harmless(words), console.width) or [""]:
        console.print(Text(line, style="bold"))


def _print_findings(console: "Console", findings: Iterable[Finding]) -> None:
    marks = {"note": "  ", "attention": "! ", "stops the fit": "✗ "}
    for finding in findings:
        print_words(console, f"{marks[finding.level]}{finding.about}: {finding.text}", indent="    ")


def _finish(progress: "Progress") -> None:
    for task in progress.tasks:
        progress.update(task.id, completed=1)
