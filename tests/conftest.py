"""What holds for every test, however pytest is started."""

from __future__ import annotations

import os
from pathlib import Path

# before numpy is imported by any test: two workers on two cores, one thread each
for _variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_variable, "1")
# what Hypothesis keeps between runs stays out of the tree
os.environ.setdefault(
    "HYPOTHESIS_STORAGE_DIRECTORY", str(Path.home() / ".cache" / "gain-signoff" / "hypothesis")
)

from hypothesis import settings  # noqa: E402  the variables above come first on purpose

# no deadline for one example: the machine is shared, and a slow one is not a wrong one
settings.register_profile("house", deadline=None, print_blob=True)
settings.load_profile("house")
