"""What the service itself finds in a recomputation, each in a sentence that a technician understands."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Weight = Literal["stop", "caution", "note"]
"""stop: do not use these gains as they stand. caution: think, and answer for it. note: good to know."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Finding:
    """One finding: its code, how much it weighs, and the sentence that says it."""

    finding: str
    weight: Weight
    sentence: str
    needs_deviation: bool = False
    """An approval has to answer this finding with a deviation, like a criterion that was not assessed."""
