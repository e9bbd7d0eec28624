"""What DEVELOPERS.md copies from the code is the code's present word."""

from __future__ import annotations

import re
from pathlib import Path

from service.records.lifecycle import diagram

GUIDE = (Path(__file__).parents[2] / "DEVELOPERS.md").read_text("utf-8")


def test_the_diagram_of_the_life_cycle_is_the_table_s() -> None:
    (drawn,) = re.findall(r"^```mermaid\n(.*?)\n```$", GUIDE, re.MULTILINE | re.DOTALL)
    assert drawn == diagram()


def test_the_commands_of_the_guide_stand_in_the_script_that_runs_every_check() -> None:
    script = (Path(__file__).parents[2] / ".ci" / "tests").read_text("utf-8")
    for tool in ("ruff check", "ruff format --check", "mypy", "-n 2 --dist loadgroup"):
        assert tool in GUIDE
        assert tool in script
