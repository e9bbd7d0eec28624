"""Texts that people typed, made fit for paper: nothing acts as markup, nothing vanishes.

reportlab's paragraphs read markup; a character without a glyph prints as nothing one could name; letters of
scripts that run from right to left would stand in the wrong order. Such characters are told by their code
points, in place.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterator
from dataclasses import fields, is_dataclass
from itertools import groupby
from xml.sax.saxutils import escape

from service.figures import fonts

CODE_POINTS = (
    "[U+…] stands for a character that this typeface does not hold, "
    "or would print in the wrong order; it is told by its Unicode code point."
)
_EMPTY_LINES = re.compile(r"\n{3,}")
_RIGHT_TO_LEFT = {"R", "AL", "AN", "RLE", "RLO", "RLI", "LRE", "LRO", "LRI", "FSI", "PDF", "PDI"}
_NEVER_SEEN = {"Cc", "Cf", "Cn", "Co", "Cs", "Zl", "Zp"}
_LAST_SEARCHABLE = 0xFFFF
"""reportlab writes a wrong text layer for characters beyond; they could be seen and not be found."""

_SPACES = {"\n", "\t", " "}


def visible(text: str) -> str:
    """The text with each character that cannot be printed rightly told by its code point: `[U+6D41]`."""
    parts = []
    for printable, characters in groupby(text, _is_printable):
        if printable:
            parts.append("".join(characters))
        else:
            parts.append("[" + " ".join(f"U+{ord(character):04X}" for character in characters) + "]")
    return "".join(parts)


def is_told_in_part(text: str) -> bool:
    """Say whether some character of a text is told by its code point."""
    return not all(_is_printable(character) for character in text)


def strings_in(told: object) -> Iterator[str]:
    """Every text in a dataclass and in what it holds."""
    if isinstance(told, str):
        yield told
    elif isinstance(told, tuple):
        for each in told:
            yield from strings_in(each)
    elif is_dataclass(told):
        for field in fields(told):
            yield from strings_in(getattr(told, field.name))


def marked_up(text: str) -> str:
    """The text for a reportlab paragraph, in which it means itself and nothing else."""
    spaced = _EMPTY_LINES.sub("\n\n", text.replace("\r\n", "\n"))
    return escape(visible(spaced)).replace("\t", " ").replace("\n", "<br/>")


def _is_printable(character: str) -> bool:
    if character in _SPACES:
        return True
    if ord(character) > _LAST_SEARCHABLE:
        return False
    return (
        ord(character) in fonts.code_points()
        and unicodedata.category(character) not in _NEVER_SEEN
        and unicodedata.bidirectional(character) not in _RIGHT_TO_LEFT
    )
