"""``bayesmed report``: from a study file to a printed comparison and a folder."""

from pathlib import Path

from bayesmed.cli.fitted import fitted
from bayesmed.cli.json_text import compared, print_json
from bayesmed.cli.printed import print_answer, print_words, screen, steps
from bayesmed.report.findings import completed
from bayesmed.report.place import check_folder


def report(path: Path, folder: str, *, quiet: bool, as_json: bool = False, rows: bool = True) -> int:
    """Fit a study, print the comparison of its beliefs, write the folder, and return the exit code."""
    quiet = quiet or as_json
    check_folder(folder)
    with steps(quiet=quiet) as say:
        first = fitted(path, say)
    if not quiet:
        console = screen()
        print_answer(console, first.audit, first.comparison)
    with steps(quiet=quiet) as say:
        say("Looking for what would overturn it")
        found = completed(first)
        # Here, so that the answer is not kept waiting for it.
        from bayesmed.report.folder import write_findings

        say("Drawing the pictures and writing the folder")
        written = write_findings(found, folder, rows=rows)
    names = sorted(each.name for each in written.iterdir() if not each.name.startswith("."))
    if as_json:
        print_json("report", {"folder": str(written), "files": names, **compared(first.comparison)})
    elif not quiet:
        print_words(console, f"\nWritten to {folder}: {', '.join(names)}")
    return 0
