"""What is printed of a run."""

from __future__ import annotations

import time

from tests.mutation.mutants import Mutant


class Tally:
    """Counts the faults of one module and tells of those that nobody noticed."""

    def __init__(self, module: str) -> None:
        self._module = module
        self._began = time.perf_counter()
        self.tried = self.survived = 0

    def add(self, mutant: Mutant, *, survived: bool, put_in: bool = True) -> None:
        """Count one fault."""
        self.tried += 1
        self.survived += survived
        if survived or not put_in:
            told = f"line {mutant.line}: {_short(mutant.was)}  →  {_short(mutant.becomes)}"
            print(f"{self._module} {told}{'' if put_in else '  (not tried)'}", flush=True)

    def end(self) -> None:
        """Print the sum."""
        lasted_s = time.perf_counter() - self._began
        told = f"{self.tried} faults, {self.survived} unnoticed, {lasted_s:.0f} s"
        print(f"{self._module}: {told}", flush=True)


def _short(text: str) -> str:
    one_line = " ".join(text.split())
    return one_line if len(one_line) <= 90 else f"{one_line[:89]}…"
