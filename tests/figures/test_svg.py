"""An SVG that may stand in a page: named, without repeated ids, inert under a strict content policy."""

from __future__ import annotations

import re
from xml.dom import minidom

import pytest
from reportlab.graphics.shapes import Drawing

from service.figures.frequency import frequency_drawing
from service.figures.responses import response_drawing
from service.figures.svg import to_svg
from tests.figures.responses_to_draw import frequency, load, setpoint

DRAWINGS = {
    "setpoint": response_drawing(setpoint(earlier=True)),
    "load": response_drawing(load(), width_pt=250, height_pt=200, text_pt=7),
    "frequency": frequency_drawing(frequency(), max_sensitivity_limit=2.0),
}


@pytest.fixture(params=sorted(DRAWINGS))
def svg(request: pytest.FixtureRequest) -> str:
    return to_svg(DRAWINGS[request.param], title="A <b>title</b> & more", description="What it shows")


def parsed(svg: str) -> minidom.Element:
    return minidom.parseString(svg).documentElement  # noqa: S318 (made by the code under test)


def test_it_is_one_element_with_a_name_and_a_description(svg: str) -> None:
    root = parsed(svg)
    assert root.getAttribute("role") == "img"
    named = {tag: root.getElementsByTagName(tag) for tag in ("title", "desc")}
    assert [len(found) for found in named.values()] == [1, 1]
    assert root.getAttribute("aria-labelledby") == named["title"][0].getAttribute("id")
    assert root.getAttribute("aria-describedby") == named["desc"][0].getAttribute("id")
    assert named["title"][0].firstChild.data == "A <b>title</b> & more"


def test_nothing_needs_inline_styles_or_scripts_or_anything_from_elsewhere(svg: str) -> None:
    assert not re.search(r"\sstyle=|<style|<script|href|url\(|<!DOCTYPE|<\?xml", svg)


def test_three_charts_on_a_page_repeat_no_id() -> None:
    page = "".join(to_svg(drawing, title=name, description=name) for name, drawing in DRAWINGS.items())
    ids = re.findall(r'\sid="([^"]+)"', page)
    assert len(ids) == len(set(ids)) == 6


def test_all_text_is_in_the_shared_typeface(svg: str) -> None:
    texts = parsed(svg).getElementsByTagName("text")
    assert len(texts) > 10
    assert {text.getAttribute("font-family") for text in texts} == {"'DejaVu Sans', Verdana, sans-serif"}


def test_nothing_is_drawn_outside_the_picture(svg: str) -> None:
    root = parsed(svg)
    width, height = float(root.getAttribute("width")), float(root.getAttribute("height"))
    for line in root.getElementsByTagName("polyline"):
        for point in line.getAttribute("points").split(","):
            x, y = (float(part) for part in point.split())
            assert -0.5 <= x <= width + 0.5
            assert -0.5 <= y <= height + 0.5


def test_lines_are_told_apart_without_colour(svg: str) -> None:
    """No two lines of different colour, but grid and frame, share their dashes and their width."""
    looks: dict[tuple[str, str], set[str]] = {}
    for line in parsed(svg).getElementsByTagName("polyline"):
        look = line.getAttribute("stroke-dasharray"), line.getAttribute("stroke-width")
        looks.setdefault(look, set()).add(line.getAttribute("stroke"))
    assert all(len(colours) == 1 for colours in looks.values())


def test_a_drawing_is_as_large_as_it_was_asked_to_be() -> None:
    drawing: Drawing = response_drawing(setpoint(), width_pt=300, height_pt=210, text_pt=7)
    assert 'viewBox="0 0 300 210"' in to_svg(drawing)
