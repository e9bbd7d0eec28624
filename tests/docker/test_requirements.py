"""What the image installs: one version of each package, by its digest, as the service asks for it."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name
from packaging.version import Version

ROOT = Path(__file__).parents[2]
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))
FILES = ["requirements.txt", "build-requirements.txt"]


def pinned(file: str) -> dict[str, tuple[Version, list[str]]]:
    """Each package with its version and digests. Anything else in the file is a failure."""
    found = {}
    for line in (ROOT / "docker" / file).read_text("utf-8").replace("\\\n", "").splitlines():
        name, version, digests = re.fullmatch(
            r"([a-z0-9._-]+)==(\S+)((?:\s+--hash=sha256:[0-9a-f]{64})+)\s*", line
        ).groups()  # type: ignore[union-attr]  # a line of another kind fails here
        found[canonicalize_name(name)] = Version(version), digests.split()
    return found


@pytest.mark.parametrize("file", FILES)
def test_each_package_has_one_version_and_its_digests(file: str) -> None:
    assert all(digests for _, digests in pinned(file).values())


def test_the_versions_are_those_that_the_service_asks_for() -> None:
    project = PROJECT["project"]
    found = pinned("requirements.txt")
    for text in (*project["dependencies"], *project["optional-dependencies"]["postgres"]):
        wanted = Requirement(text)
        version, _ = found[canonicalize_name(wanted.name)]
        assert version in wanted.specifier, text


def test_the_wheel_is_built_with_what_the_project_asks_for() -> None:
    found = pinned("build-requirements.txt")
    for text in PROJECT["build-system"]["requires"]:
        wanted = Requirement(text)
        assert found[canonicalize_name(wanted.name)][0] in wanted.specifier


@pytest.mark.parametrize("file", FILES)
def test_no_test_tool_is_in_the_image(file: str) -> None:
    tools = {
        canonicalize_name(Requirement(text).name)
        for text in PROJECT["project"]["optional-dependencies"]["test"]
    }
    # the service, its libraries and its build need these as well
    assert set(pinned(file)) & tools <= {"packaging", "psycopg"}
