"""Tries each fault of the named modules with the tests that run its lines, in the tree it is started in.

The tests of the module's own file come first, then the quickest, and the first that fails ends it. What runs
in other processes of the service is not seen by the measurement.
"""

from __future__ import annotations

import argparse
import importlib
import sys
from pathlib import Path

from tests.mutation.forking import PASSED, forked, silenced
from tests.mutation.mutants import mutants
from tests.mutation.telling import Tally

LIBRARIES = (
    "alembic.command",
    "argon2",
    "control",
    "coverage",
    "cryptography.hazmat.primitives.asymmetric.ed25519",
    "flask",
    "numpy",
    "prometheus_client",
    "psycopg",
    "pydantic",
    "reportlab.graphics.renderSVG",
    "reportlab.platypus",
    "rfc8785",
    "scipy.signal",
    "segno",
    "sqlalchemy.orm",
    "sqlalchemy.dialects.sqlite",
    "waitress",
)
"""What takes long to import and is imported once. Nothing of the service: it is the faulty module's."""


def main() -> int:
    """Try all faults: first those inside functions, then those that only an import can bring in."""
    wanted = _arguments()
    for library in LIBRARIES:
        importlib.import_module(library)
    kept = Path("coverers.json").resolve()
    if forked(lambda: _try_inside(wanted, kept), limit_s=24 * 3600) != PASSED:
        return 1
    for module in wanted.modules:
        _try_at_import(module, kept, wanted)
    return 0


def _arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m tests.mutation")
    parser.add_argument("modules", nargs="+", help="files of the service")
    parser.add_argument("--tests", nargs="+", required=True, help="folders or files of tests")
    parser.add_argument("--deselect", default="postgresql or walks", help="tests to leave out (pytest's -k)")
    parser.add_argument(
        "--others-max", type=int, default=200, help="tests beside the module's own file that are run at most"
    )
    parser.add_argument(
        "--all-at-import", action="store_true", help="for what runs while a session's store is set up"
    )
    return parser.parse_args()


def _try_inside(wanted: argparse.Namespace, kept: Path) -> int:
    import pytest  # noqa: PLC0415  each process has its own

    from tests.mutation.inside import TryingInside  # noqa: PLC0415  imports pytest

    modules = [] if wanted.all_at_import else wanted.modules
    trying = TryingInside(wanted.modules, modules, kept, wanted.others_max)
    return int(pytest.main(["-q", "-s", *wanted.tests, "-k", f"not ({wanted.deselect})"], plugins=[trying]))


def _try_at_import(module: str, kept: Path, wanted: argparse.Namespace) -> None:
    from tests.mutation.coverers import Coverers  # noqa: PLC0415  not before the other fork

    coverers, file = Coverers.read(kept), Path(module)
    source, tally = file.read_text(), Tally(f"{module} (at import)")
    try:
        for mutant in mutants(source):
            if coverers.is_inside(module, mutant) and not wanted.all_at_import:
                continue
            tests = coverers.tests_of(module, mutant, wanted.others_max)
            file.write_text(mutant.module)
            _forget_compiled(file)
            outcome = forked(lambda: _run(tests), coverers.limit_s(tests))  # noqa: B023  it runs at once
            tally.add(mutant, survived=outcome == PASSED)
    finally:
        file.write_text(source)
        _forget_compiled(file)
    tally.end()


def _run(tests: list[str]) -> int:
    import pytest  # noqa: PLC0415  see above

    sys.dont_write_bytecode = True
    silenced()
    return int(pytest.main(["-q", "-x", *tests]))


def _forget_compiled(file: Path) -> None:
    for compiled in (file.parent / "__pycache__").glob(f"{file.stem}.*"):
        compiled.unlink()


if __name__ == "__main__":
    sys.exit(main())
