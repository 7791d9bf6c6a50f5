"""``bayesmed check``: the audit of a study, without a fit."""

from pathlib import Path

from bayesmed.cli.json_text import audited, print_json
from bayesmed.cli.printed import print_audit, print_heading, screen
from bayesmed.report.study_file import read_study_file
from bayesmed.study.audit import audit
from bayesmed.study.points import points


def check(path: Path, *, as_json: bool = False) -> int:
    """Read a study file, print its audit, and return the exit code."""
    asked = read_study_file(path)
    observed = asked.observe()
    found = audit(observed)
    # What the conclusions would refuse is better said before a fit than after it.
    points(observed, asked.at)
    if as_json:
        print_json("check", {"title": asked.title, **audited(found)})
    else:
        console = screen()
        print_heading(console, asked.title)
        print_audit(console, found)
    return 1 if found.stops else 0
