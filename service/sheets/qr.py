"""A QR code (ISO/IEC 18004) as a vector drawing."""

from __future__ import annotations

import segno
from reportlab.graphics.shapes import Drawing, Path
from reportlab.lib.colors import black

QUIET_MODULES = 4
"""Of blank paper round the code: ISO/IEC 18004, section 6.3.8 (from memory)."""


def code_drawing(text: str, side_pt: float) -> Drawing:
    """The text as a square code, its quiet zone included; level M survives a smudge."""
    code = segno.make(text, error="m", micro=False, boost_error=False)
    rows = [list(row) for row in code.matrix]
    module = side_pt / (len(rows) + 2 * QUIET_MODULES)
    path = Path(fillColor=black, strokeColor=None)
    for index, row in enumerate(rows):
        foot = side_pt - (QUIET_MODULES + index + 1) * module
        for start, stop in _runs(row):
            _add_box(path, (QUIET_MODULES + start) * module, foot, (stop - start) * module, module)
    drawing = Drawing(side_pt, side_pt)
    drawing.add(path)
    return drawing


def _runs(row: list[int]) -> list[tuple[int, int]]:
    """Start and end of each run of dark modules: one box a run leaves no hairlines between modules."""
    runs, start = [], None
    for index, dark in enumerate([*row, 0]):
        if dark and start is None:
            start = index
        elif not dark and start is not None:
            runs.append((start, index))
            start = None
    return runs


def _add_box(path: Path, x: float, y: float, width: float, height: float) -> None:
    path.moveTo(x, y)
    path.lineTo(x + width, y)
    path.lineTo(x + width, y + height)
    path.lineTo(x, y + height)
    path.closePath()
