"""A sheet as PDF: the same bytes for the same content, in every process."""

from __future__ import annotations

from io import BytesIO

from reportlab.pdfgen.canvas import Canvas
from reportlab.platypus import BaseDocTemplate, Frame, PageBreak, PageTemplate

from service.figures import fonts
from service.sheets import texts
from service.sheets.content import SheetContent
from service.sheets.panel_page import panel_page
from service.sheets.record_pages import record_pages
from service.sheets.styles import FOOT_PT, MARGIN_PT, PAGE_PT, WIDTH_PT

DEMONSTRATION = "DEMONSTRATION – an invented plant, not for use"


def sheet_pdf(content: SheetContent) -> bytes:
    """The sheet, A4: the first page for the panel, the further ones for whoever checks the record."""
    fonts.register()
    # each page says of how many it is one, which only laying them out can tell
    _, pages = _built(content, pages=0)
    return _built(content, pages=pages)[0]


def _built(content: SheetContent, *, pages: int) -> tuple[bytes, int]:
    buffer = BytesIO()
    document = BaseDocTemplate(
        buffer,
        pagesize=PAGE_PT,
        title=f"Controller gains {texts.visible(content.tag)}",
        author=texts.visible(content.site),
        subject=content.state.heading,
        creator="gain sign-off service",
        lang="en-GB",
        invariant=1,
        initialFontName=fonts.REGULAR,
    )
    height = PAGE_PT[1] - 2 * MARGIN_PT - FOOT_PT
    frame = Frame(
        MARGIN_PT,
        MARGIN_PT + FOOT_PT,
        WIDTH_PT,
        height,
        leftPadding=0,
        rightPadding=0,
        topPadding=0,
        bottomPadding=0,
    )

    def around(canvas: Canvas, _: BaseDocTemplate) -> None:
        _head_and_foot(canvas, content, pages)

    document.addPageTemplates(PageTemplate(frames=[frame], onPage=around))
    document.build([*panel_page(content), PageBreak(), *record_pages(content)])
    return buffer.getvalue(), document.page


def _head_and_foot(canvas: Canvas, content: SheetContent, pages: int) -> None:
    """Every page stands for itself: whose gains, in which state, which page, and whether all is invented."""
    number = canvas.getPageNumber()
    left, right = MARGIN_PT, PAGE_PT[0] - MARGIN_PT
    canvas.setLineWidth(0.5)
    canvas.line(left, MARGIN_PT + FOOT_PT - 4, right, MARGIN_PT + FOOT_PT - 4)
    _line(canvas, left, MARGIN_PT + 7, f"{content.tag} · {content.site}", 0.8 * WIDTH_PT, bold=True)
    _line(canvas, left, MARGIN_PT - 3, content.state.heading, 0.8 * WIDTH_PT)
    canvas.setFont(fonts.BOLD, 8)
    canvas.drawRightString(right, MARGIN_PT + 7, f"page {number} of {pages}")
    if content.demonstration:
        canvas.setFont(fonts.BOLD, 9)
        canvas.drawCentredString(PAGE_PT[0] / 2, PAGE_PT[1] - MARGIN_PT + 9, DEMONSTRATION)
        canvas.drawCentredString(PAGE_PT[0] / 2, MARGIN_PT - 15, DEMONSTRATION)


def _line(canvas: Canvas, x: float, y: float, text: str, width: float, *, bold: bool = False) -> None:
    """One line of at most `width` points, in smaller letters where it is long."""
    font = fonts.BOLD if bold else fonts.REGULAR
    told = texts.visible(text)
    size = min(8.0, 8.0 * width / fonts.width_pt(told, font, 8.0))
    canvas.setFont(font, size)
    canvas.drawString(x, y, told)
