"""Which tests run which lines, and how long each test takes."""

from __future__ import annotations

import json
import time
from collections.abc import Callable, Iterable
from dataclasses import asdict, dataclass
from pathlib import Path

import coverage

from tests.mutation.mutants import Mutant


@dataclass(frozen=True)
class Coverers:
    """Tests by their node ids; `lines`: module → line → the tests that run it."""

    durations_s: dict[str, float]
    lines: dict[str, dict[str, list[str]]]

    @staticmethod
    def measured(modules: list[str], tests: Iterable[tuple[str, Callable[[], None]]]) -> Coverers:
        """Run each test once."""
        measuring = coverage.Coverage(data_file=None, config_file=False, include=modules)
        measuring.start()
        durations_s = {}
        for name, run in tests:
            measuring.switch_context(name)
            began = time.perf_counter()
            run()
            durations_s[name] = time.perf_counter() - began
        measuring.stop()
        data, lines = measuring.get_data(), {}
        for module in modules:
            found = data.contexts_by_lineno(str(Path(module).resolve()))
            lines[module] = {str(line): [name for name in names if name] for line, names in found.items()}
        return Coverers(durations_s, lines)

    @staticmethod
    def read(file: Path) -> Coverers:
        """Read what `write` wrote."""
        return Coverers(**json.loads(file.read_text()))

    def write(self, file: Path) -> None:
        """Keep it for another process."""
        file.write_text(json.dumps(asdict(self)))

    def is_inside(self, module: str, mutant: Mutant) -> bool:
        """Say whether the fault is in a function that a test runs, and not an import alone."""
        return mutant.function is not None and bool(self._of_statement(module, mutant))

    def tests_of(self, module: str, mutant: Mutant, others_max: int) -> list[str]:
        """Return the tests that run the statement; of one that only an import runs, the module's.

        Those of the module's own file come first, then the quickest `others_max` others.
        """
        name = f"/test_{Path(module).stem}"
        own = {test for test in self.durations_s if name in test}
        of_module = {test for tests in self.lines[module].values() for test in tests}
        tests = self._of_statement(module, mutant) or own | of_module
        quickest = sorted(tests, key=self.durations_s.__getitem__)
        return [test for test in quickest if test in own] + [test for test in quickest if test not in own][
            :others_max
        ]

    def _of_statement(self, module: str, mutant: Mutant) -> set[str]:
        lines = self.lines[module]
        return {test for line in mutant.statement for test in lines.get(str(line), ())}

    def limit_s(self, tests: list[str]) -> float:
        """Return the time past which these tests hang."""
        return 30 + 10 * sum(self.durations_s[test] for test in tests)
