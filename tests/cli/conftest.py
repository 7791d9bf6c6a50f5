"""A study file that is quickly fitted."""

from collections.abc import Callable
from pathlib import Path

import pytest

from bayesmed.examples import example_study_file

type Write = Callable[..., Path]

QUICK = """\
title = "Coaching, exercise and the knee"
data = "data.csv"
exposure = "coaching"
mediator = "exercise ~ coaching + confidence + age"
outcome = "function ~ exercise * confidence + coaching + age"
[beliefs]
"nothing left out" = 0.0
'<b>"drive"</b>, [red]helps[/red] | both of them in ways that nobody measured and few would deny' = 0.3
"=HYPERLINK(1)" = { family = "LKJ", eta = 2 }
[at]
confidence = [4, 8]
[fit]
method = "exact"
draws = 100
chains = 4
random_seed = 3
"""


@pytest.fixture
def quick(tmp_path: Path) -> Write:
    """Write the study with some of its text replaced."""

    def write(**replaced: str) -> Path:
        source = example_study_file("knee_rehab").with_name("knee_rehab.csv")
        (tmp_path / "data.csv").write_bytes(source.read_bytes())
        text = QUICK
        for old, new in replaced.items():
            assert old in text
            text = text.replace(old, new)
        path = tmp_path / "study.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return write
