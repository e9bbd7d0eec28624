"""Two controllers held against one another, in any form, to 1e-9."""

from __future__ import annotations

from service.analysis.controller import Controller
from service.analysis.plant import Ranges
from service.records.views import Comparison

RELATIVE_TOLERANCE = 1e-9


def compare(before: Controller | None, after: Controller, ranges: Ranges) -> Comparison:
    """Compare term by term: as entered where form and units agree, else in the parallel form in seconds."""
    raise NotImplementedError
