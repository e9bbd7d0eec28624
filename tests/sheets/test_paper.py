"""The PDF as a reader gets it back: whole, the same each time, inert, inside the page."""

from __future__ import annotations

import hashlib
import os
import re
import subprocess
import sys
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from io import BytesIO
from pathlib import Path

import pypdf
import pypdfium2
import pytest
import segno

from service.figures.responses import Response
from service.sheets import texts
from service.sheets.content import SheetContent
from service.sheets.layout import DEMONSTRATION, sheet_pdf
from service.sheets.texts import strings_in, visible
from tests.codes import codes_in
from tests.sheets.cases import HOSTILE
from tests.sheets.conftest import Printed

PrintCase = Callable[[str], Printed]
ROOT = Path(__file__).parents[2]
CODE_CORNER_PT = (468, 32, 562, 122)
"""Left, top, right and bottom of a corner of the first page in which nothing else is printed."""

IN_OTHER_PROCESS = """
import hashlib, sys
from service.sheets.layout import sheet_pdf
from tests.sheets.cases import ordinary
print(hashlib.sha256(sheet_pdf(ordinary())).hexdigest())
"""


def bare(text: str) -> str:
    """A text without its spaces and line breaks, which paper sets anew."""
    return re.sub(r"\s+", "", text.replace("\N{NO-BREAK SPACE}", ""))


def running_text(printed: Printed) -> str:
    """All pages as one text, without what each page repeats at its head and foot."""
    content = printed.content
    whole = []
    for number, page in enumerate(printed.pages, start=1):
        text = bare(page)
        repeated = (
            f"{visible(content.tag)} · {visible(content.site)}",
            content.state.heading,
            f"page {number} of {len(printed.pages)}",
            *([DEMONSTRATION] * 2 if content.demonstration else []),
        )
        for line in repeated:
            assert bare(line) in text
            text = text.replace(bare(line), "", 1)
        whole.append(text)
    return "".join(whole)


def said(content: SheetContent) -> Iterator[str]:
    """Every text of the content but the one that stands in the code, and those that are drawn in charts."""
    drawn = {
        text for each in content.assessments for response in each.responses for text in strings_in(response)
    }
    yield from (text for text in strings_in(content) if text != content.code and text not in drawn)


def test_every_field_of_the_content_is_on_the_paper(printed: Printed) -> None:
    # the weights of findings stand in capitals
    paper = (running_text(printed) + bare(printed.content.state.heading)).casefold()
    assert [text for text in said(printed.content) if bare(visible(text)).casefold() not in paper] == []


def test_every_stored_response_is_drawn(printed: Printed) -> None:
    responses: list[Response] = [r for each in printed.content.assessments for r in each.responses]
    titles = [response.title for response in responses]
    assert all(bare(printed.text).count(bare(title)) == titles.count(title) for title in titles)


def test_pages_are_numbered(printed: Printed) -> None:
    numbers = [re.findall(r"page (\d+) of (\d+)", page) for page in printed.pages]
    of = str(len(printed.pages))
    assert numbers == [[(str(number), of)] for number in range(1, len(printed.pages) + 1)]


def test_every_font_is_embedded(printed: Printed) -> None:
    names = set()
    for page in pypdf.PdfReader(BytesIO(printed.pdf)).pages:
        for font in page["/Resources"]["/Font"].values():
            names.add(font["/BaseFont"].split("+")[-1])
            assert "/FontFile2" in font["/FontDescriptor"]
    assert names == {"DejaVuSans", "DejaVuSans-Bold"}


def test_nothing_lies_outside_the_page(printed: Printed) -> None:
    for page in pypdfium2.PdfDocument(printed.pdf):
        width, height = page.get_size()
        text = page.get_textpage()
        for index in range(text.count_chars()):
            left, bottom, right, top = text.get_charbox(index)
            assert 0 <= left <= right <= width
            assert 0 <= bottom <= top <= height


def test_nothing_on_the_paper_acts(printed: Printed) -> None:
    """No link, no picture, no script, no attachment, whatever a text says."""
    reader = pypdf.PdfReader(BytesIO(printed.pdf))
    assert not {"/OpenAction", "/AA", "/Names", "/AcroForm"} & set(reader.trailer["/Root"])
    for page in reader.pages:
        assert "/Annots" not in page
        assert list(page.images) == []


def test_hostile_markup_is_read_as_it_was_typed(print_case: PrintCase) -> None:
    paper = running_text(print_case("hostile"))
    assert paper.count(bare(HOSTILE)) >= 9
    assert bare("<b>1.8</b>") in paper


@pytest.mark.parametrize("name", ["ordinary", "filter_by_ratio", "level", "two_zeros", "unstable"])
def test_a_usual_sheet_has_two_pages(print_case: PrintCase, name: str) -> None:
    assert len(print_case(name).pages) == 2


@pytest.mark.parametrize("name", ["ordinary", "in_force", "level", "two_zeros", "long_texts", "hostile"])
def test_the_cautions_stand_on_the_first_page(print_case: PrintCase, name: str) -> None:
    printed = print_case(name)
    first = bare(printed.pages[0])
    for group in printed.content.cautions:
        assert all(bare(visible(sentence)) in first for sentence in group.sentences)


@pytest.mark.parametrize("name", ["ordinary", "in_force", "level", "two_zeros", "hostile"])
def test_the_box_to_fill_in_stands_on_the_first_page(print_case: PrintCase, name: str) -> None:
    first = bare(print_case(name).pages[0])
    for words in ("As found", "As left", "Typed by", "Read back by", "Date, time"):
        assert bare(words) in first


@pytest.mark.parametrize("name", ["unstable", "no_earlier_gains", "no_model", "foreign_letters"])
def test_a_sheet_that_is_not_for_entry_has_no_box_to_fill_in(print_case: PrintCase, name: str) -> None:
    assert "Fill in by hand" not in print_case(name).text


def test_the_demonstration_is_marked_on_every_page(print_case: PrintCase) -> None:
    assert all(page.count(DEMONSTRATION) == 2 for page in print_case("ordinary").pages)
    assert DEMONSTRATION not in print_case("in_force").text


def test_letters_without_a_glyph_are_told_by_their_code_points(print_case: PrintCase) -> None:
    printed = print_case("foreign_letters")
    assert "[U+6D41 U+91CF]-101" in printed.pages[0]
    assert "[U+0645 U+0636 U+062E U+0629], é Ω €" in printed.pages[0]
    assert bare("[U+05EA U+05D9 U+05E7 U+05D5 U+05DF] [U+1F600]") in bare(printed.text)
    assert "Сушка" in printed.text
    assert bare(texts.CODE_POINTS) in bare(printed.text)
    assert bare(texts.CODE_POINTS) not in bare(print_case("ordinary").text)


@pytest.mark.parametrize("name", ["ordinary", "two_zeros"])
def test_the_code_holds_the_digests_and_the_checkpoint(print_case: PrintCase, name: str) -> None:
    printed = print_case(name)
    digests, *checkpoint = printed.content.code.split("\n{")
    assert digests.split() == [
        *("record", "01JQ7Z4M8W"),
        *("content", "3f" * 32),
        *("entry", "421", "b7" * 32),
    ]
    # no checkpoint was kept with the signature of the second case
    assert len(checkpoint) == (name == "ordinary")
    assert codes_in(printed.pdf) == [printed.content.code]
    assert dark_modules(printed) == code_matrix(printed.content.code)


def test_the_bytes_are_the_same_in_every_process(print_case: PrintCase) -> None:
    digests = {hashlib.sha256(print_case("ordinary").pdf).hexdigest()}
    for seed in ("1", "2"):
        done = subprocess.run(
            [sys.executable, "-c", IN_OTHER_PROCESS],
            cwd=ROOT,
            env={**os.environ, "PYTHONHASHSEED": seed, "PYTHONPATH": str(ROOT), "TZ": "Asia/Kolkata"},
            capture_output=True,
            text=True,
            check=True,
        )
        digests.add(done.stdout.strip())
    assert len(digests) == 1


def test_printing_twice_in_one_process_gives_the_same_bytes(print_case: PrintCase) -> None:
    printed = print_case("gain_sets")
    assert sheet_pdf(printed.content) == printed.pdf


def code_matrix(text: str) -> list[list[int]]:
    return [list(row) for row in segno.make(text, error="m", micro=False, boost_error=False).matrix]


def dark_modules(printed: Printed) -> list[list[int]]:
    """The code as a camera sees it: one sample in the middle of each module of the drawn page."""
    scale = 6
    page = pypdfium2.PdfDocument(printed.pdf)[0].render(scale=scale, grayscale=True).to_pil().convert("L")
    left, top, right, bottom = CODE_CORNER_PT
    side = right - left if len(printed.content.code) > 300 else 74
    corner = page.crop(tuple(scale * point for point in (right - side, top, right, min(bottom, top + side))))
    code = corner.crop(corner.point(lambda grey: 255 * (grey < 128)).getbbox())
    size = len(code_matrix(printed.content.code))
    at = [int((index + 0.5) * code.width / size) for index in range(size)]
    return [[int(code.getpixel((x, y)) < 128) for x in at] for y in at]


def test_sheets_printed_at_once_by_several_threads_are_the_same(print_case: PrintCase) -> None:
    printed = print_case("ordinary")
    with ThreadPoolExecutor(4) as threads:
        made = list(threads.map(sheet_pdf, [printed.content] * 8))
    assert set(made) == {printed.pdf}
