"""How text looks on a sheet: black on white, two weights of one typeface, sizes to read at arm's length."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

from reportlab.lib.colors import black, white
from reportlab.lib.enums import TA_CENTER
from reportlab.lib.pagesizes import A4
from reportlab.lib.styles import ParagraphStyle
from reportlab.lib.units import mm
from reportlab.platypus import Paragraph, Table

from service.figures.fonts import BOLD, REGULAR, width_pt
from service.sheets.texts import marked_up, visible

PAGE_PT = A4
MARGIN_PT = 13 * mm
FOOT_PT = 8 * mm
WIDTH_PT = PAGE_PT[0] - 2 * MARGIN_PT


BARE = [(f"{side}PADDING", (0, 0), (-1, -1), 0) for side in ("LEFT", "RIGHT", "TOP", "BOTTOM")]
"""Look of a table that only sets things side by side."""


def _style(name: str, size_pt: float, *, bold: bool = False, **further: object) -> ParagraphStyle:
    return ParagraphStyle(
        name,
        fontName=BOLD if bold else REGULAR,
        bulletFontName=REGULAR,
        fontSize=size_pt,
        leading=round(1.18 * size_pt, 1),
        textColor=further.pop("colour", black),
        splitLongWords=1,
        **further,
    )


BODY = _style("body", 6.8)
STRONG = _style("strong", 6.8, bold=True)
SMALL = _style("small", 6.4)
LABEL = _style("label", 7.5)
LABEL_STRONG = _style("strong label", 8, bold=True)
STEP = _style("step", 8, leftIndent=10.2, firstLineIndent=-10.2, spaceAfter=2)
LOUD = _style("loud", 9.5, bold=True)
SETTING = _style("setting", 8.5)
SETTING_STRONG = _style("setting strong", 10, bold=True)
HEADING = _style("heading", 8.2, bold=True, spaceBefore=3, spaceAfter=0.5, keepWithNext=1)
SUBHEADING = _style("subheading", 7, bold=True, spaceBefore=2, spaceAfter=0.5, keepWithNext=1)
STEPS = _style("steps", 8.5, bold=True, spaceBefore=3, spaceAfter=1.5, keepWithNext=1)
COLUMN = _style("column", 9, bold=True)
UNIT = _style("unit", 9.5)
BANNER = _style("banner", 16, bold=True, alignment=TA_CENTER, spaceAfter=2)
BANNER_SENTENCE = _style("banner sentence", 9.5, alignment=TA_CENTER)
INVERSE_BANNER = _style("inverse banner", 16, bold=True, alignment=TA_CENTER, spaceAfter=2, colour=white)
INVERSE_SENTENCE = _style("inverse banner sentence", 9.5, alignment=TA_CENTER, colour=white)


def said(text: str, style: ParagraphStyle = BODY) -> Paragraph:
    """A paragraph in which the text means itself, whatever markup it looks like."""
    return Paragraph(marked_up(text), style)


def table(
    rows: list[list[Any]], widths: Sequence[float], look: Sequence[tuple[Any, ...]], **further: Any
) -> Table:
    """A table of paragraphs.

    Its empty cells name their font, or Helvetica would come in, which is not embedded; and take no height.
    """
    whole = (0, 0), (-1, -1)
    empty = [("FONTNAME", *whole, REGULAR), ("FONTSIZE", *whole, 1), ("LEADING", *whole, 1)]
    return Table(rows, colWidths=list(widths), style=[*empty, *look], **further)


def joined(items: Iterable[tuple[str, str]], style: ParagraphStyle = BODY) -> Paragraph:
    """One paragraph of names and texts, to save room."""
    told = (f'<font name="{BOLD}">{marked_up(name)}:</font> {marked_up(text)}' for name, text in items)
    return Paragraph(" · ".join(told), style)


def named(name: str, text: str, style: ParagraphStyle = BODY) -> Paragraph:
    """A paragraph with its name before it in bold."""
    return joined([(name, text)], style)


def fitting(text: str, width: float, largest_pt: float, smallest_pt: float, *, bold: bool) -> ParagraphStyle:
    """The style in which the text fits on a line of `width` points; at the smallest size it wraps."""
    font = BOLD if bold else REGULAR
    natural = width_pt(visible(text), font, 1.0) or 1.0
    size = min(largest_pt, max(smallest_pt, width / natural))
    return _style(f"fitting {size:.1f}", round(size - 0.05, 1), bold=bold)
