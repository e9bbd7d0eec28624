"""Typed texts on paper: nothing acts, nothing vanishes, nothing stands in the wrong order."""

from __future__ import annotations

from xml.sax.saxutils import unescape

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.figures import fonts
from service.sheets.texts import marked_up, visible


@pytest.mark.parametrize(
    ("typed", "told"),
    [
        ("TIC-101 äé Ω → ✓", "TIC-101 äé Ω → ✓"),
        ("流量", "[U+6D41 U+91CF]"),
        ("a\u202eb", "a[U+202E]b"),
        ("zero\u200bwidth", "zero[U+200B]width"),
        ("مضخة", "[U+0645 U+0636 U+062E U+0629]"),
        ("bell\x07", "bell[U+0007]"),
    ],
)
def test_what_cannot_be_printed_rightly_is_told_by_code_points(typed: str, told: str) -> None:
    assert visible(typed) == told


@given(st.text())
def test_everything_that_is_printed_has_a_glyph(text: str) -> None:
    assert {ord(character) for character in visible(text)} - {0x09, 0x0A} <= fonts.code_points()


@given(st.text())
def test_no_markup_is_left_but_line_breaks(text: str) -> None:
    written = marked_up(text)
    assert "<" not in written.replace("<br/>", "")
    assert unescape(written.replace("<br/>", "\n")).count("&") == visible(text).count("&")


def test_floods_of_empty_lines_are_dammed() -> None:
    assert marked_up("a" + "\n" * 500 + "b") == "a<br/><br/>b"
