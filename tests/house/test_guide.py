"""What DEVELOPERS.md copies from the code is the code's present word."""

from __future__ import annotations

import re
from pathlib import Path

from service.records import change_lifecycle, lifecycle

ROOT = Path(__file__).parents[2]
GUIDE = (ROOT / "DEVELOPERS.md").read_text("utf-8")
README = (ROOT / "README.md").read_text("utf-8")


def test_the_diagrams_of_the_life_cycles_are_the_tables() -> None:
    drawn = re.findall(r"^```mermaid\n(.*?)\n```$", GUIDE, re.MULTILINE | re.DOTALL)
    assert drawn == [lifecycle.diagram(), change_lifecycle.diagram()]


def test_the_commands_of_the_guide_stand_in_the_script_that_runs_every_check() -> None:
    script = (ROOT / ".ci" / "tests").read_text("utf-8")
    for tool in ("ruff check", "ruff format --check", "mypy", "-n 2 --dist loadgroup"):
        assert tool in GUIDE
        assert tool in script


def test_every_place_that_the_guides_name_is_there() -> None:
    named = set(re.findall(r"(?<![\w/])(?:service|tests|migrations|docker|\.ci)/[\w./-]*\w", GUIDE + README))
    assert len(named) > 10
    assert [place for place in sorted(named) if not (ROOT / place).exists()] == []
