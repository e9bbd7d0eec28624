"""What stands in the tree: the fixed top level, and no word that belongs to one machine or is unfinished."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "service", "migrations", "tests", "docker", "LICENSE"}
GIT = ["git", "ls-files"]
KEPT = subprocess.run(GIT, cwd=ROOT, check=True, capture_output=True, text=True).stdout.splitlines()

# Written in two halves each, so that this file does not find itself.
UNFINISHED = re.compile(r"TO" r"DO|FIX" r"ME|XX" r"X\b|Not" r"Implemented" r"Error")
ONE_MACHINE = re.compile(r"(?<![\w.])/(?:root|home|wo" r"rk|Users)/\w")
ADDRESS = re.compile(r"\bhttps?:/" r"/([A-Za-z0-9.-]+)")

# No address to be called: this machine, invented hosts (RFC 2606) and namespaces of standards.
HARMLESS = re.compile(
    r"(127\.0\.0\.1|localhost|([a-z0-9-]+\.)*(example|invalid|test)(\.(com|org|net))?|www\.w3\.org|www\.apache\.org"
    r"|json-schema\.org|spec\.openapis\.org)$"
)
THEIR_OWN_WORDS = ("LICENSE", "service/pages/static/", "service/figures/fonts/")


def texts() -> dict[str, str]:
    """Every file of ours that is text; vendored files keep their own words."""
    found = {}
    for name in KEPT:
        if not name.startswith(THEIR_OWN_WORDS) and (ROOT / name).is_file():
            content = (ROOT / name).read_bytes()
            if b"\0" not in content[:4096]:
                found[name] = content.decode("utf-8")
    return found


def places(pattern: re.Pattern[str]) -> list[str]:
    return [
        f"{name}:{number}: {match.group(0)}"
        for name, text in texts().items()
        for number, line in enumerate(text.splitlines(), 1)
        for match in pattern.finditer(line)
    ]


def test_the_top_level_is_fixed() -> None:
    top = {name.split("/")[0] for name in KEPT if not name.startswith(".")}
    assert top - {"docker"} == TOP - {"docker"}


@pytest.mark.parametrize(
    "pattern", [UNFINISHED, ONE_MACHINE], ids=["unfinished marks", "paths of one machine"]
)
def test_no_file_holds(pattern: re.Pattern[str]) -> None:
    assert places(pattern) == []


def test_no_file_names_an_address_outside() -> None:
    named = [place for place in places(ADDRESS) if not HARMLESS.search(place.rsplit("/", 1)[-1])]
    assert named == []


def test_the_patterns_find_what_they_look_for() -> None:
    assert UNFINISHED.search("# TO" + "DO later")
    assert ONE_MACHINE.search("open('/ro" + "ot/x')")
    assert ADDRESS.search("fetch https:/" + "/somewhere.net/simple")
    assert not HARMLESS.search("somewhere.net")
    assert not HARMLESS.search("127.0.0.1.somewhere.net")


def test_no_module_is_a_drawer_for_anything() -> None:
    drawers = {"utils.py", "common.py", "helpers.py", "base.py", "misc.py"}
    assert [name for name in KEPT if name.rsplit("/", 1)[-1] in drawers] == []
