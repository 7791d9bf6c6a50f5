"""The code on the README and on pages of the documentation runs and prints what stands under it."""

import re
from pathlib import Path

import pytest

CHECKOUT = Path(__file__).parents[2]


@pytest.mark.parametrize("page", ["README.md", "docs/earlier_evidence.md"])
def test_a_page_shows_what_its_code_prints(capsys, page):
    text = (CHECKOUT / page).read_text(encoding="utf-8")
    code = re.search(r"```python\n(.*?)```", text, re.DOTALL).group(1)
    promised = re.search(r"```text\n(.*?)```", text, re.DOTALL).group(1)
    exec(compile(code, page, "exec"), {})
    printed = capsys.readouterr().out
    numbers = r"[<>]?-?\d+\.?\d*"
    assert re.sub(numbers, "#", printed).split() == re.sub(numbers, "#", promised).split()
    for found, expected in zip(_numbers(printed), _numbers(promised), strict=True):
        # Draws of another machine differ by Monte Carlo error: that of an interval's end is about 0.05 here.
        assert found == pytest.approx(expected, abs=0.2)


def _numbers(text):
    return [float(n) for n in re.findall(r"-?\d+\.\d+", text)]
