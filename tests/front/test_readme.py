"""The README's notebook lines run and print the table that stands under them."""

import re
from pathlib import Path

import pytest

README = Path(__file__).parents[2] / "README.md"


def test_the_table_is_the_one_that_the_lines_print(capsys):
    text = README.read_text(encoding="utf-8")
    code = re.search(r"```python\n(.*?)```", text, re.DOTALL).group(1)
    promised = re.search(r"```text\n(.*?)```", text, re.DOTALL).group(1)
    exec(compile(code, "README.md", "exec"), {})
    printed = capsys.readouterr().out
    numbers = r"[<>]?-?\d+\.?\d*"
    assert re.sub(numbers, "#", printed).split() == re.sub(numbers, "#", promised).split()
    for found, expected in zip(_numbers(printed), _numbers(promised), strict=True):
        # Draws of another machine differ by Monte Carlo error: that of an interval's end is about 0.05 here.
        assert found == pytest.approx(expected, abs=0.2)


def _numbers(text):
    return [float(n) for n in re.findall(r"-?\d+\.\d+", text)]
