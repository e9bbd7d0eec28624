"""Faults inside functions: tried in a running pytest, by giving the live function the faulty one's code.

A fault costs a fork and its tests, with nothing imported, collected or set up anew.
"""

from __future__ import annotations

import functools
import gc
from collections import defaultdict
from pathlib import Path
from types import CodeType, FunctionType

import pytest

from tests.mutation.coverers import Coverers
from tests.mutation.forking import PASSED, forked, silenced
from tests.mutation.mutants import Mutant, mutants
from tests.mutation.telling import Tally

CANNOT_BE_PUT_IN = 71

Functions = dict[tuple[str, str | None], list[FunctionType]]
"""By file and qualified name: the function, and those that were made inside it and still live."""


class TryingInside:
    """A pytest plugin that takes the place of the usual loop over the tests."""

    def __init__(self, measured: list[str], tried: list[str], kept: Path, others_max: int) -> None:
        self._measured = measured
        self._tried = tried
        self._kept = kept
        self._others_max = others_max
        self._failed = False

    def pytest_runtest_logreport(self, report: pytest.TestReport) -> None:
        self._failed = self._failed or report.failed

    def pytest_runtestloop(self, session: pytest.Session) -> bool:
        items = {item.nodeid: item for item in session.items}
        self._set_up(list(items.values()))
        if forked(lambda: self._measure(items), limit_s=3600) != PASSED:
            raise pytest.UsageError("the tests do not pass without a fault")
        coverers = Coverers.read(self._kept)
        live = _live_functions(self._tried)
        self._cached = [each for each in gc.get_objects() if isinstance(each, functools._lru_cache_wrapper)]
        # what is here now is not looked through, and so not copied, in each fork
        gc.freeze()
        for module in self._tried:
            self._try_module(module, coverers, items, live)
        return True

    def _set_up(self, items: list[pytest.Item]) -> None:
        """Run one test of each folder, so that what lasts for a session is made once and not in each fork."""
        for item in {item.path.parent: item for item in reversed(items)}.values():
            self._run(item)

    def _measure(self, items: dict[str, pytest.Item]) -> int:
        tests = [(name, lambda item=item: self._run(item)) for name, item in items.items()]
        Coverers.measured(self._measured, tests).write(self._kept)
        return int(self._failed)

    def _run(self, item: pytest.Item) -> None:
        item._initrequest()  # type: ignore[attr-defined]  # it may have run before
        # the session in the place of the next test: its fixtures stay, and no others
        item.config.hook.pytest_runtest_protocol(item=item, nextitem=item.session)

    def _try_module(
        self, module: str, coverers: Coverers, items: dict[str, pytest.Item], live: Functions
    ) -> None:
        tally = Tally(f"{module} (functions)")
        for mutant in mutants(Path(module).read_text()):
            if not coverers.is_inside(module, mutant):
                continue
            tests = coverers.tests_of(module, mutant, self._others_max)
            chosen = [items[test] for test in tests]
            functions = live[_file(module), mutant.function]
            outcome = forked(lambda: self._try(mutant, functions, chosen), coverers.limit_s(tests))  # noqa: B023
            tally.add(mutant, survived=outcome == PASSED, put_in=outcome != CANNOT_BE_PUT_IN)
        tally.end()

    def _try(self, mutant: Mutant, functions: list[FunctionType], items: list[pytest.Item]) -> int:
        silenced()
        faulty = _codes_by_name(compile(mutant.module, "faulty", "exec"))
        codes = [faulty[function.__code__.co_qualname] for function in functions]
        # code is put in only where it reaches for the same variables outside itself
        same = [f.__code__.co_freevars == c.co_freevars for f, c in zip(functions, codes, strict=True)]
        if not functions or not all(same):
            return CANNOT_BE_PUT_IN
        for function, code in zip(functions, codes, strict=True):
            function.__code__ = code
        for cached in self._cached:
            # what the right function has returned before would be returned again
            if cached.__wrapped__ in functions:
                cached.cache_clear()
        for item in items:
            self._run(item)
            if self._failed:
                return 1
        return PASSED


def _live_functions(modules: list[str]) -> Functions:
    files = {_file(module) for module in modules}
    found: Functions = defaultdict(list)
    for each in gc.get_objects():
        if isinstance(each, FunctionType) and each.__code__.co_filename in files:
            outermost = each.__code__.co_qualname.partition(".<locals>")[0]
            found[each.__code__.co_filename, outermost].append(each)
    return found


def _file(module: str) -> str:
    return str(Path(module).resolve())


def _codes_by_name(code: CodeType) -> dict[str, CodeType]:
    inner = [each for each in code.co_consts if isinstance(each, CodeType)]
    found = {code.co_qualname: code}
    for each in inner:
        found |= _codes_by_name(each)
    return found
