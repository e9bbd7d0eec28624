"""What paper says to a reader: the text of all pages without its spaces, and the codes as a scanner has them.

The scanner is zxing-cpp, which shares nothing with what draws the codes.
"""

from __future__ import annotations

import re
from io import BytesIO

import pypdf
import pypdfium2
import zxingcpp

DOTS_PER_INCH = 200
"""A plain office scanner; the codes are read at 150 too."""


def text_in(pdf: bytes) -> str:
    pages = pypdf.PdfReader(BytesIO(pdf)).pages
    return re.sub(r"\s+", "", "".join(page.extract_text() for page in pages))


def codes_in(pdf: bytes) -> list[str]:
    """Each QR code, in the order of the pages."""
    found = []
    for page in pypdfium2.PdfDocument(pdf):
        picture = page.render(scale=DOTS_PER_INCH / 72).to_pil()
        found += [code.text for code in zxingcpp.read_barcodes(picture)]
    return found
