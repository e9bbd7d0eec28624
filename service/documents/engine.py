"""With what a recomputation was made: versions of this service and of the libraries that computed."""

from __future__ import annotations

import platform
from dataclasses import dataclass
from functools import cache
from importlib.metadata import PackageNotFoundError, version

SERVICE_VERSION_FALLBACK = "not installed"
"""Where the service runs from a source tree that no installer has seen."""


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
        service=_service_version(),
        numpy=version("numpy"),
        scipy=version("scipy"),
        python=platform.python_version(),
    )


def _service_version() -> str:
    try:
        return version("gain-signoff")
    except PackageNotFoundError:
        return SERVICE_VERSION_FALLBACK
