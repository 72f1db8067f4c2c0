"""Texts under a heading: whole, whatever their length, and nothing without a text."""

import pytest

from metro.headed_text import headed


def test_each_text_is_a_line_under_the_heading():
    assert headed("checks", ["a", "b c"]) == "checks\n  a\n  b c"
    assert headed("checks", []) == ""


@pytest.mark.parametrize("word", ["x" * 7, "half-sum", "m/√Hz", "y" * 200])
def test_long_texts_are_whole_over_several_lines(word):
    text = " ".join([word] * 60)
    first, *lines = headed("t", [text]).splitlines()
    assert first == "t"
    assert " ".join(line.strip() for line in lines) == text
    assert lines[0].startswith("  ")
    assert not lines[0].startswith("   ")
    assert all(line.startswith("    ") for line in lines[1:])
    assert max(map(len, lines)) <= max(118, len(word) + 4)
