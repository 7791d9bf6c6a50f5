"""The code on the README runs and prints what stands under it; a page with evidence from elsewhere says what it did."""

import re
from pathlib import Path

import pytest

CHECKOUT = Path(__file__).parents[2]


def test_the_readme_shows_what_its_code_prints(capsys):
    text = (CHECKOUT / "README.md").read_text(encoding="utf-8")
    code = re.search(r"```python\n(.*?)```", text, re.DOTALL).group(1)
    promised = re.search(r"```text\n(.*?)```", text, re.DOTALL).group(1)
    exec(compile(code, "README.md", "exec"), {})
    printed = capsys.readouterr().out
    numbers = r"[<>]?-?\d+\.?\d*"
    assert re.sub(numbers, "#", printed).split() == re.sub(numbers, "#", promised).split()
    for found, expected in zip(_numbers(printed), _numbers(promised), strict=True):
        # Draws of another machine differ by Monte Carlo error: that of an interval's end is about 0.05 here.
        assert found == pytest.approx(expected, abs=0.2)


def test_an_earlier_experiment_teaches_rho_what_the_page_says(capsys):
    text = (CHECKOUT / "docs/how-to/earlier_evidence.md").read_text(encoding="utf-8")
    page = {}
    for cell in re.findall(r"```\{code-cell\}\n(?::[^\n]*\n)*(.*?)```", text, re.DOTALL):
        exec(compile(cell, "earlier_evidence.md", "exec"), page)
    moved = page["fit"].movement()
    assert "structural prior of 'exercise' informs it" in capsys.readouterr().out
    # The page of ideas finds the same by weighing exact draws: it says so in words.
    assert (moved.posterior_mean, moved.posterior_sd) == pytest.approx((0.243, 0.074), abs=0.02)
    effects = [f.summary().set_index("effect")["mean"]["indirect"] for f in (page["fit"], page["alone"])]
    assert effects == pytest.approx([0.714, 2.0], abs=0.2)
    assert page["seen"] == "0.083"


def _numbers(text):
    return [float(n) for n in re.findall(r"-?\d+\.\d+", text)]
