"""The faults that are tried: each one a module that can be run, and none where a fault would say nothing."""

from __future__ import annotations

import ast

from tests.mutation.mutants import mutants

MODULE = '''"""What it is about."""
import os

LIMIT = 5

class Kept:
    """A sentence."""
    count: int = 0

    def add(self, value: "Literal['x']", more=True):
        """Another."""
        if value is not None and value < LIMIT:
            self.count += len(f"{value + 1}")
            return self.count
        raise ValueError("a sentence for people")
'''

EXPECTED = [
    (4, None, "5", "6"),
    (8, None, "0", "1"),
    (10, None, "True", "False"),
    (12, "Kept.add", "value is not None and value < LIMIT", "(value < LIMIT)"),
    (12, "Kept.add", "value is not None and value < LIMIT", "(value is not None)"),
    (12, "Kept.add", "value is not None", "(value is None)"),
    (12, "Kept.add", "value < LIMIT", "(value <= LIMIT)"),
    (13, "Kept.add", 'self.count += len(f"{value + 1}")', "pass"),
    (14, "Kept.add", "return self.count", "return None"),
    (15, "Kept.add", 'raise ValueError("a sentence for people")', "pass"),
]


def test_each_fault_stands_in_one_place() -> None:
    found = list(mutants(MODULE))
    assert [(mutant.line, mutant.function, mutant.was, mutant.becomes) for mutant in found] == EXPECTED


def test_each_fault_makes_another_module_that_can_be_read() -> None:
    modules = [mutant.module for mutant in mutants(MODULE)]
    assert len({MODULE, *modules}) == len(modules) + 1
    for module in modules:
        ast.parse(module)


def test_a_condition_of_a_query_is_left_out_and_sql_is_turned_round() -> None:
    text = "found = select(x).where(y).limit(1)\nguard = 'WHEN NEW.id <> OLD.id'\n"
    becomes = [mutant.becomes for mutant in mutants(text)]
    assert becomes == ["(select(x).where(y))", "(select(x))", "2", "('WHEN NEW.id = OLD.id')"]
