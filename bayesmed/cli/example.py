"""``bayesmed example``: an invented study to start from."""

import shutil
from pathlib import Path

from bayesmed.core.errors import ArgumentError
from bayesmed.examples import example_names, example_study_file


def example(name: str | None, folder: str | None) -> int:
    """Write an example's study file and data into a new or empty folder, or list the examples; return the exit code."""
    if name is None:
        for known in example_names():
            print(known)
        return 0
    if name not in example_names():
        raise ArgumentError(f"there is no example {name!r}; there are {', '.join(example_names())}")
    if folder is None:
        raise ArgumentError(f"--out: name the folder to write {name!r} into")
    target = Path(folder)
    if not target.parent.is_dir():
        raise ArgumentError(f"folder {folder!r}: {str(target.parent)!r} does not exist; create it first")
    if target.exists() and (not target.is_dir() or any(target.iterdir())):
        raise ArgumentError(f"folder {folder!r} is not new or empty; choose another name")
    source = example_study_file(name)
    target.mkdir(exist_ok=True)
    for file in sorted(source.parent.iterdir()):
        if file.suffix in (".toml", ".csv"):
            shutil.copyfile(file, target / file.name)
    study = target / source.name
    print(f"Written to {folder}, invented data. Next: bayesmed check {study}; bayesmed compare {study}")
    return 0
