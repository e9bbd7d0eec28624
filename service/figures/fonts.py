"""The one typeface of page and paper, shipped with its licence in `fonts/`."""

from __future__ import annotations

from functools import cache
from pathlib import Path

from reportlab.graphics import shapes
from reportlab.pdfbase import pdfmetrics
from reportlab.pdfbase.ttfonts import TTFont

REGULAR = "DejaVuSans"
BOLD = "DejaVuSans-Bold"
FAMILY = "DejaVu Sans"

FOLDER = Path(__file__).with_name("fonts")
"""Holds `DejaVuSans.ttf`, `DejaVuSans-Bold.ttf` and `LICENSE`."""


@cache
def register() -> None:
    """Make the typeface known to reportlab, and the default of every drawing.

    Without the second a shape that names no font would bring in Helvetica, which is not embedded.
    """
    for name in (REGULAR, BOLD):
        pdfmetrics.registerFont(TTFont(name, str(FOLDER / f"{name}.ttf")))
    pdfmetrics.registerFontFamily(REGULAR, normal=REGULAR, bold=BOLD, italic=REGULAR, boldItalic=BOLD)
    shapes.STATE_DEFAULTS["fontName"] = REGULAR


@cache
def code_points() -> frozenset[int]:
    """The characters that both weights hold a glyph for."""
    register()
    held = [set(pdfmetrics.getFont(name).face.charToGlyph) for name in (REGULAR, BOLD)]
    return frozenset(held[0] & held[1])


def width_pt(text: str, font: str, size_pt: float) -> float:
    """The width of one line of text, in points."""
    register()
    return float(pdfmetrics.stringWidth(text, font, size_pt))
