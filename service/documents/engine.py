"""With what a recomputation was made: versions of this service and of the libraries that computed."""

from __future__ import annotations

import platform
from dataclasses import dataclass
from functools import cache

import numpy
import scipy

from service.documents.version import SERVICE_VERSION


@dataclass(frozen=True, kw_only=True, slots=True)
class Engine:
    """Names and versions. Last bits of a result may differ between them."""

    service: str
    numpy: str
    scipy: str
    python: str


@cache
def engine() -> Engine:
    """The versions in this process."""
    return Engine(
        service=SERVICE_VERSION,
        numpy=numpy.__version__,
        scipy=scipy.__version__,
        python=platform.python_version(),
    )
