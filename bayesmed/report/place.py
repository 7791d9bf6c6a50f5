"""Where a report may go: written beside its place, moved there whole, never over others' files."""

import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from bayesmed.core.errors import ArgumentError

MARKER = "bayesmed_report.json"
"""Lists what bayesmed wrote into a folder, with a checksum each, so that it replaces nothing else."""


def check_folder(folder: str | Path) -> Path:
    """Return the folder's path if a report may be written there.

    Raises
    ------
    ArgumentError
        If its parent does not exist, it is a file, it holds files and bayesmed wrote none of them, or a file
        that bayesmed wrote was changed since.
    """
    target = Path(os.path.realpath(folder))
    if not target.parent.is_dir():
        raise ArgumentError(f"folder {str(folder)!r}: {str(target.parent)!r} does not exist; create it first")
    if target.exists() and not target.is_dir():
        raise ArgumentError(f"folder {str(folder)!r} is a file; choose another name")
    if not target.exists() or not any(target.iterdir()):
        return target
    if not (target / MARKER).is_file():
        raise ArgumentError(
            f"folder {str(folder)!r} is not empty and was not written by bayesmed; choose a new or an empty folder"
        )
    for name, checksum in _written(target).items():
        path = target / name
        if path.is_symlink() or (path.exists() and (not path.is_file() or _checksum(path) != checksum)):
            raise ArgumentError(
                f"folder {str(folder)!r}: {name!r} was changed after bayesmed wrote it and would be lost; "
                "move it away, or choose another folder"
            )
    return target


def write_whole(folder: str | Path, write: Callable[[Path], dict[str, Any]]) -> Path:
    """Have files written into a folder, all of them or none, and return its path.

    Parameters
    ----------
    folder : str or path
    write : callable
        Writes into the folder it is given, and returns what the marker should say of the run.

    Raises
    ------
    ArgumentError
        If the folder may not be replaced, see :func:`check_folder`, or cannot be written.
    """
    target = check_folder(folder)
    try:
        with _beside(target) as temporary:
            _mark(temporary, write(temporary))
            _move_into_place(temporary, target)
    except OSError as error:
        raise ArgumentError(f"folder {str(folder)!r} cannot be written: {error.strerror or error}") from error
    return target


def _mark(folder: Path, content: dict[str, Any]) -> None:
    files = {path.name: _checksum(path) for path in sorted(folder.iterdir())}
    text = json.dumps({**content, "files": files}, indent=2, ensure_ascii=False)
    (folder / MARKER).write_bytes(f"{text}\n".encode())


def _written(folder: Path) -> dict[str, str]:
    """Return name → checksum of what bayesmed wrote into a folder, by its marker."""
    try:
        content = json.loads((folder / MARKER).read_bytes())
        files = content["files"]
        safe = all(isinstance(name, str) and Path(name).name == name for name in files)
        if content["written_by"] != "bayesmed" or not safe:
            raise ValueError("not a marker")
        return {name: str(checksum) for name, checksum in files.items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as error:
        raise ArgumentError(
            f"folder {str(folder)!r}: its {MARKER} cannot be read, so what bayesmed wrote there is not "
            "known; choose a new or an empty folder"
        ) from error


def _checksum(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


@contextmanager
def _beside(target: Path) -> Iterator[Path]:
    """Make a temporary folder beside the target, and take away what is left of it at the end."""
    temporary = Path(tempfile.mkdtemp(prefix=f".{target.name}.", suffix=".part", dir=target.parent))
    try:
        # mkdtemp makes it private; the report should be as readable as any folder made here.
        mask = os.umask(0)
        os.umask(mask)
        temporary.chmod(0o777 & ~mask)
        yield temporary
    finally:
        shutil.rmtree(temporary, ignore_errors=True)


def _move_into_place(temporary: Path, target: Path) -> None:
    """Put the finished folder where the target is, keeping files there that bayesmed did not write."""
    if not target.exists():
        temporary.rename(target)
        return
    others = _not_ours(target)
    for name in others:
        if (temporary / name).exists():
            raise ArgumentError(
                f"folder {str(target)!r}: {name!r} is not bayesmed's, and this report has a file of that "
                "name; move it away, or choose another folder"
            )
    old = temporary.with_suffix(".old")
    target.rename(old)
    try:
        temporary.rename(target)
    except BaseException:
        old.rename(target)
        raise
    try:
        _keep(others, old, target)
    except BaseException:
        # Interrupted between two files: finish first, so that none is left behind.
        _keep(others, old, target)
        raise


def _not_ours(folder: Path) -> list[str]:
    """Return the names in a folder that bayesmed did not write."""
    written = {MARKER, *_written(folder)} if (folder / MARKER).exists() else set()
    return sorted(path.name for path in folder.iterdir() if path.name not in written)


def _keep(names: list[str], old: Path, target: Path) -> None:
    """Move what is named from the old folder to the new one, if not done yet, and take the old one away."""
    for name in names:
        if (old / name).exists() or (old / name).is_symlink():
            (old / name).rename(target / name)
    shutil.rmtree(old, ignore_errors=True)
