"""The law of the house, walked with ast: who may import whom, and who may touch the world outside."""

from __future__ import annotations

import ast
import graphlib
import re
import tokenize
from dataclasses import dataclass
from pathlib import Path

import pytest

import service

ROOT = Path(__file__).parents[2]
SERVICE = ROOT / "service"
FILES = sorted(SERVICE.rglob("*.py")) + sorted((ROOT / "migrations").rglob("*.py"))


def order() -> dict[str, int]:
    """The place of each package, as the docstring of `service` writes the arrows."""
    lines = (service.__doc__ or "").splitlines()
    arrows = " ".join(line.strip() for line in lines if "← " in line)
    return {name: place for place, names in enumerate(arrows.split(" ← ")) for name in names.split(", ")}


ORDER = order()
READERS_OF_SETTINGS = {"app", "demonstration", "command", "migrations"}
NEVER_IN_ANALYSIS = {
    "flask",
    "sqlalchemy",
    "pydantic",
    "json",
    "logging",
    "time",
    "datetime",
    "os",
    "pathlib",
}


@dataclass(frozen=True)
class Import:
    """One name that one file imports, at one line."""

    file: Path
    line: int
    name: str
    inside: bool
    """Inside a function, where it is only allowed with its reason."""

    @property
    def package(self) -> str:
        """The package of ours at which the name lies, or the library's top name."""
        parts = self.name.split(".")
        return parts[1] if parts[0] == "service" and len(parts) > 1 else parts[0]

    @property
    def ours(self) -> bool:
        return self.name.split(".")[0] == "service"

    def __str__(self) -> str:
        return f"{self.file.relative_to(ROOT)}:{self.line} imports {self.name}"


def place(file: Path) -> str:
    """The package (or the module beside the packages) that a file belongs to."""
    parts = file.relative_to(ROOT).with_suffix("").parts
    return parts[1] if parts[0] == "service" else parts[0]


def module(file: Path) -> str:
    parts = file.relative_to(ROOT).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


MODULES = {module(file) for file in FILES}


def names(statement: ast.Import | ast.ImportFrom) -> list[str]:
    if isinstance(statement, ast.Import):
        return [alias.name for alias in statement.names]
    assert statement.level == 0, "imports say the whole name"
    source = statement.module or ""
    found = [f"{source}.{alias.name}" for alias in statement.names]
    return [name if name in MODULES or not source.startswith("service") else source for name in found]


def imports(file: Path) -> list[Import]:
    tree = ast.parse(file.read_text("utf-8"))
    functions = [node for node in ast.walk(tree) if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef)]
    inside = {id(node) for function in functions for node in ast.walk(function)}
    return [
        Import(file, node.lineno, name, id(node) in inside)
        for node in ast.walk(tree)
        if isinstance(node, ast.Import | ast.ImportFrom)
        for name in names(node)
    ]


IMPORTS = [found for file in FILES for found in imports(file)]


def test_the_house_stands_here() -> None:
    assert {"analysis", "judgement", "documents", "records", "command"} <= {place(file) for file in FILES}
    assert len(IMPORTS) > 100


def test_every_package_has_its_place_in_the_order() -> None:
    placed = {*ORDER, "settings", "verification", "migrations", "__init__"}
    assert {place(file) for file in FILES} <= placed


def test_imports_point_left_only() -> None:
    wrong = [
        str(found)
        for found in IMPORTS
        if found.ours and place(found.file) in ORDER and found.package in ORDER
        if place(found.file) != found.package and ORDER[found.package] >= ORDER[place(found.file)]
    ]
    assert wrong == []


def test_the_verifier_imports_nothing_of_ours_and_serves_the_command_only() -> None:
    own = [
        str(f) for f in IMPORTS if place(f.file) == "verification" and f.ours and f.package != "verification"
    ]
    others = {place(f.file) for f in IMPORTS if f.ours and f.package == "verification"} - {"verification"}
    assert own == []
    assert others <= {"command"}


def test_modules_import_each_other_in_no_circle() -> None:
    graph: dict[str, set[str]] = {}
    for found in IMPORTS:
        if found.ours:
            graph.setdefault(module(found.file), set()).add(found.name)
    list(graphlib.TopologicalSorter(graph).static_order())


def test_an_import_inside_a_function_says_why() -> None:
    wrong = [str(found) for found in IMPORTS if found.inside and not reason_beside(found)]
    assert wrong == []


def reason_beside(found: Import) -> bool:
    """Whether a comment on the line or the one above says more than which rule it breaks."""
    with found.file.open("rb") as source:
        comments = {
            token.start[0]: re.sub(r"#\s*noqa(: *[A-Z]+[0-9]+)*|[#\s–-]", "", token.string)
            for token in tokenize.tokenize(source.readline)
            if token.type == tokenize.COMMENT
        }
    return any(comments.get(line) for line in (found.line, found.line - 1))


def test_only_the_command_finds_modules_by_their_names() -> None:
    """A name in a text is an arrow that the tests above do not see."""
    finders = {
        place(found.file) for found in IMPORTS if found.name in ("importlib", "importlib.import_module")
    }
    assert finders == {"command"}
    assert [str(file) for file in FILES if "__import__" in file.read_text("utf-8")] == []


def test_what_the_results_are_checked_against_stands_alone() -> None:
    references = sorted((ROOT / "tests" / "references").rglob("*.py"))
    assert len(references) >= 3
    assert [str(found) for file in references for found in imports(file) if found.ours] == []


def test_the_mathematics_knows_no_world_outside() -> None:
    analysis = [found for found in IMPORTS if place(found.file) == "analysis"]
    assert [str(found) for found in analysis if found.name.split(".")[0] in NEVER_IN_ANALYSIS] == []


def test_only_the_second_opinion_imports_python_control() -> None:
    importers = {module(found.file) for found in IMPORTS if found.name.split(".")[0] == "control"}
    assert importers == {"service.analysis.second_opinion"}


def test_settings_are_read_where_things_are_assembled_only() -> None:
    readers = {place(f.file) for f in IMPORTS if f.ours and f.package == "settings"}
    assert readers <= READERS_OF_SETTINGS


def test_nothing_but_settings_reads_the_environment() -> None:
    # setting a default for the threads of BLAS, before numpy is imported, reads nothing
    reads = re.compile(
        r"\bos\.environ\b(?!\.setdefault\()|\bos\.getenv\b|from os import .*\b(environ|getenv)\b"
    )
    readers = {place(file) for file in FILES if reads.search(file.read_text("utf-8"))}
    assert readers == {"settings"}


@pytest.mark.parametrize("file", sorted(SERVICE.rglob("__init__.py")), ids=lambda file: file.parent.name)
def test_a_package_states_its_law_and_holds_little_else(file: Path) -> None:
    tree = ast.parse(file.read_text("utf-8"))
    law = " ".join((ast.get_docstring(tree) or "").split())
    if file.parent != SERVICE:
        assert [part for part in ("Lives here", "May import", "Must never know") if part not in law] == []
    assert len(tree.body) <= 6
