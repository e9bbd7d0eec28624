"""A result says with what it was made."""

from __future__ import annotations

import tomllib
from pathlib import Path

from service.documents.engine import engine


def test_the_services_version_is_that_of_the_project() -> None:
    project = tomllib.loads((Path(__file__).parents[2] / "pyproject.toml").read_text("utf-8"))["project"]
    assert engine().service == project["version"]
