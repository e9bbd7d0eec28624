"""Make a copy of the tree and try the faults there: `python -m tests.mutation MODULE… --tests FOLDER…`."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

TREE = Path(__file__).parents[2]


def main() -> int:
    """Run `tests.mutation.running` in the copy, so that what it imports is the copy's."""
    # test files that a run has compiled are read again by the next one
    environment = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}
    with tempfile.TemporaryDirectory(prefix="mutation-") as folder:
        copy = Path(folder) / "tree"
        shutil.copytree(TREE, copy, ignore=shutil.ignore_patterns(".git", "__pycache__"))
        command = [sys.executable, "-m", "tests.mutation.running", *sys.argv[1:]]
        return subprocess.run(command, cwd=copy, env=environment, check=False).returncode


if __name__ == "__main__":
    sys.exit(main())
