"""``bayesmed check``: the audit of a study, without a fit."""

from pathlib import Path

from bayesmed.cli.printed import print_audit, print_heading, screen
from bayesmed.report.study_file import read_study_file
from bayesmed.study.audit import audit
from bayesmed.study.points import points


def check(path: Path) -> int:
    """Read a study file, print its audit, and return the exit code."""
    asked = read_study_file(path)
    observed = asked.observe()
    found = audit(observed)
    console = screen()
    print_heading(console, asked.title)
    print_audit(console, found)
    # What the conclusions would refuse is better said before a fit than after it.
    points(observed, asked.at)
    return 1 if found.stops else 0
