"""Breaking labels into lines by their measured width."""

from hypothesis import given, settings
from hypothesis import strategies as st

from bayesmed.plots.layout import broken, text_width


@settings(deadline=None, max_examples=50)
@given(st.text(alphabet="abc XYZ-ü$_", max_size=60), st.floats(0.3, 3.0))
def test_no_line_is_wider_and_nothing_is_lost(text: str, width: float) -> None:
    lines = broken(text, 8, width)
    assert "".join("".join(lines).split()) == "".join(text.split())
    assert all(text_width(line, 8) <= width or len(line) == 1 for line in lines)


def test_words_stay_whole_where_they_fit() -> None:
    assert broken("one two three", 8, text_width("one two", 8) + 0.01) == ["one two", "three"]
    assert broken("", 8, 1.0) == [""]
