"""``bayesmed compare``: from a study file to a comparison of beliefs, nothing written."""

from pathlib import Path

from bayesmed.cli.fitted import fitted
from bayesmed.cli.json_text import compared, print_json
from bayesmed.cli.printed import print_answer, screen, steps


def compare(path: Path, *, as_json: bool) -> int:
    """Fit a study, print the comparison of its beliefs, and return the exit code."""
    with steps(quiet=as_json) as say:
        found = fitted(path, say)
    if as_json:
        print_json("compare", compared(found.comparison))
        return 0
    print_answer(screen(), found.audit, found.comparison)
    return 0
