"""The command ``bayesmed``: its arguments, its exit codes, and errors as one line on standard error."""

import argparse
import os
import sys
import warnings
from collections.abc import Callable, Sequence
from io import TextIOWrapper
from pathlib import Path

from bayesmed.core.errors import ArgumentError, BayesmedError, BayesmedWarning
from bayesmed.examples import example_names, example_study_file

FINE, WRONG, USAGE, INTERRUPTED = 0, 1, 2, 130

CODES = """\
exit codes:
  0    fine
  1    something in the study, its data or the folder is wrong (the message says what), or a
       finding of the audit stops the fit
  2    the command was not understood
  130  interrupted; nothing was written
"""
EXAMPLES = {
    "report": """\
example:
  bayesmed report study.toml --out report_folder
  bayesmed report knee_rehab --out knee_rehab_report     (the invented example that comes along)

FOLDER must be new, empty, or one that an earlier report was written into. Then its files are
replaced, and files that bayesmed did not write, or that were changed since, are never touched.
""",
    "check": """\
example:
  bayesmed check study.toml

Each line is a finding; "!" marks what deserves attention, "✗" what stops the fit.
""",
    "compare": """\
example:
  bayesmed compare study.toml
  bayesmed compare study.toml --json > comparison.json

With --json one document goes to standard output: numbers unrounded, infinite ones as "inf" and
"-inf", those that do not exist as null.
""",
    "example": """\
example:
  bayesmed example                                       (lists the examples)
  bayesmed example knee_rehab --out knee_rehab

DIR must be new or empty.
""",
}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command and return its exit code.

    Parameters
    ----------
    arguments : list of str, optional
        Without the program's name; those of the process if left out.
    """
    try:
        chosen = _parser().parse_args(arguments)
    except SystemExit as stop:
        # argparse has said what there was to say; it leaves with 2 for a usage error and 0 after --help.
        return stop.code if isinstance(stop.code, int) else USAGE
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper):
            # A terminal that cannot show a character shows a question mark rather than a traceback.
            stream.reconfigure(errors="replace")
    with warnings.catch_warnings():
        warnings.showwarning = _printer()
        warnings.simplefilter("default", BayesmedWarning)
        try:
            return _run(chosen)
        except BayesmedError as error:
            print(f"bayesmed: {error}", file=sys.stderr)
            return WRONG
        except BrokenPipeError:
            # The reader, say `head`, has left; keep Python from complaining once more at exit.
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            return WRONG
        except KeyboardInterrupt:
            print("bayesmed: interrupted; nothing was written", file=sys.stderr)
            return INTERRUPTED


def _run(chosen: argparse.Namespace) -> int:
    if chosen.command == "example":
        from bayesmed.cli.example import example

        return example(chosen.name, chosen.out)
    study = _study_path(chosen.study)
    if chosen.command == "check":
        from bayesmed.cli.check import check

        return check(study, as_json=chosen.json)
    if chosen.command == "compare":
        from bayesmed.cli.compare import compare

        return compare(study, as_json=chosen.json)
    from bayesmed.cli.report import report

    return report(study, chosen.out, quiet=chosen.quiet, as_json=chosen.json, rows=not chosen.without_rows)


def _study_path(given: str) -> Path:
    """Return the path of a study file, or of the example that has the name given."""
    path = Path(given)
    if path.is_file():
        return path
    if given in example_names():
        return example_study_file(given)
    if path.is_dir() and (path / "study.toml").is_file():
        raise ArgumentError(f"{given!r} is a folder; name the file, {str(path / 'study.toml')!r}")
    raise ArgumentError(f"there is no study file {given!r}, and no example of that name ({', '.join(example_names())})")


def _parser() -> argparse.ArgumentParser:
    from importlib.metadata import version

    parser = argparse.ArgumentParser(
        prog="bayesmed",
        description="Causal mediation in which unmeasured confounding is a belief: state it, compare, see what tips.",
        epilog="\n".join([*EXAMPLES.values(), CODES]),
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"bayesmed {version('bayesmed')}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="{report,compare,check,example}")
    for name, summary in (
        ("report", "fit a study, print the comparison of beliefs, and write tables, picture and summary"),
        ("compare", "fit a study and print the comparison of beliefs, writing nothing"),
        ("check", "read a study and its data and print the audit, without fitting"),
        ("example", "write an invented study to start from"),
    ):
        command = commands.add_parser(
            name,
            help=summary,
            description=f"{summary[0].upper()}{summary[1:]}.",
            epilog=f"{EXAMPLES[name]}\n{CODES}",
            formatter_class=argparse.RawDescriptionHelpFormatter,
        )
        if name == "example":
            command.add_argument("name", metavar="NAME", nargs="?", help="one of those listed when it is left out")
            command.add_argument("--out", metavar="DIR", help="folder to write into")
            continue
        command.add_argument("study", metavar="STUDY", help="study file (TOML), or the name of an example")
        if name == "report":
            command.add_argument("--out", metavar="FOLDER", required=True, help="folder to write into")
            command.add_argument("--without-rows", action="store_true", help="keep nothing of the participants' rows")
            command.add_argument("--quiet", action="store_true", help="print warnings and errors only")
        command.add_argument("--json", action="store_true", help="print one JSON document, for machines")
    return parser


def _printer() -> Callable[..., None]:
    """Return what prints a warning as one line on standard error, the same one once."""
    said: set[str] = set()

    def show(message: Warning | str, category: type[Warning], *_: object, **__: object) -> None:
        name = "warning" if issubclass(category, BayesmedWarning) else category.__name__
        line = f"bayesmed: {name}: {message}"
        if line not in said:
            print(line, file=sys.stderr)
        said.add(line)

    return show
