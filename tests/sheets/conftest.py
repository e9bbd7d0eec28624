"""Every case is recomputed and printed once a run."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from io import BytesIO

import pypdf
import pytest

from service.sheets.content import SheetContent
from service.sheets.layout import sheet_pdf
from tests.sheets.cases import CASES


@dataclass(frozen=True)
class Printed:
    """A sheet with what was meant to stand on it, and what a reader gets back from each page."""

    content: SheetContent
    pdf: bytes
    pages: tuple[str, ...]

    @property
    def text(self) -> str:
        return "\n".join(self.pages)


@cache
def printed_case(name: str) -> Printed:
    content = CASES[name]()
    pdf = sheet_pdf(content)
    pages = pypdf.PdfReader(BytesIO(pdf)).pages
    return Printed(content, pdf, tuple(page.extract_text() for page in pages))


@pytest.fixture(params=sorted(CASES))
def printed(request: pytest.FixtureRequest) -> Printed:
    return printed_case(request.param)


@pytest.fixture
def print_case() -> object:
    return printed_case
