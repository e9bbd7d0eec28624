"""What a finding is, and what it is found in."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from service.analysis.results import Analysis, LoopFacts, Recomputation
from service.judgement.claims import ClaimFinding
from service.judgement.quantities import judged

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


@dataclass(frozen=True, slots=True)
class Case:
    """One recomputation with the claims that were compared with it."""

    recomputation: Recomputation
    claims: tuple[ClaimFinding, ...] = ()

    @property
    def facts(self) -> LoopFacts:
        """What is known of the loop itself."""
        return self.recomputation.facts

    @property
    def judged(self) -> Analysis | None:
        """The analysis that the loop is judged on, None where it was not computed."""
        return judged(self.recomputation)

    @property
    def analyses(self) -> tuple[Analysis, ...]:
        """Every analysis that was computed, the one that is judged on first."""
        both = (self.judged, self.recomputation.continuous)
        present = [analysis for analysis in both if analysis is not None]
        return tuple(present[:1] if len(present) == 2 and present[0] is present[1] else present)
