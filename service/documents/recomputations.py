"""One recomputation without a record: the request, and the answer in the shape that is sent."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Annotated, Literal

from annotated_types import Ge, Le, Len

from service.analysis.errors import FieldError
from service.analysis.plant import Ranges
from service.analysis.recomputation import recompute
from service.analysis.results import (
    Analysis,
    Curves,
    EquivalentGains,
    LoopFacts,
    Recomputation,
    SecondOpinion,
    Verdict,
    WorstCase,
)
from service.documents import limits
from service.documents.discriminated import ControllerField, PlantModelField
from service.documents.engine import Engine, engine
from service.documents.errors import invalid_field
from service.judgement.claims import ClaimFinding, Claims, compare
from service.judgement.criteria import Criteria, CriterionFinding, judge
from service.judgement.findings import Finding, find

SettlingBand = Annotated[float, Ge(limits.SETTLING_BAND_PERCENT_MIN), Le(limits.SETTLING_BAND_PERCENT_MAX)]


@dataclass(frozen=True, kw_only=True, slots=True)
class RecomputationRequest:
    """A plant and a controller, with limits and claims to hold the results against."""

    plant_model: PlantModelField
    controller: ControllerField
    ranges: Ranges | None = None
    criteria: Criteria | None = None
    claims: Claims | None = None
    settling_band_percent: SettlingBand = 2.0
    include: Annotated[tuple[Literal["curves", "second_opinion"], ...], Len(0, 2)] = ()


@dataclass(frozen=True, kw_only=True, slots=True)
class RecomputationAnswer:
    """Everything that was recomputed, and what it means against limits and claims: the one shape of it, sent
    and stored. Where curves and second opinion are None they are left out (`service.documents.writing`).
    """

    verdict: Verdict
    judged_on: Literal["continuous", "sampled"]
    continuous: Analysis
    sampled: Analysis | None
    worst_case: WorstCase | None
    loop_type: int
    equivalent_gains: tuple[EquivalentGains, ...]
    findings: tuple[CriterionFinding | Finding, ...]
    """What came of each limit, then the service's own findings."""
    claims: tuple[ClaimFinding, ...]
    engine: Engine
    facts: LoopFacts
    not_computed: tuple[Literal["worst_case"], ...] = ()
    curves: Curves | None = None
    second_opinion: SecondOpinion | None = None

    @property
    def criteria(self) -> tuple[CriterionFinding, ...]:
        """What came of each limit."""
        return tuple(entry for entry in self.findings if isinstance(entry, CriterionFinding))

    @property
    def own_findings(self) -> tuple[Finding, ...]:
        """The service's own findings, the heaviest first."""
        return tuple(entry for entry in self.findings if isinstance(entry, Finding))

    @property
    def recomputation(self) -> Recomputation:
        """What was computed, without what it means."""
        return Recomputation(**{field.name: getattr(self, field.name) for field in fields(Recomputation)})


def answer(request: RecomputationRequest) -> RecomputationAnswer:
    """Recompute, hold against limits and claims, and say what was found.

    Raises InvalidDocument where controller and plant form no loop.
    """
    return judged(_recomputation(request), request.criteria, request.claims)


def judged(
    recomputation: Recomputation, criteria: Criteria | None, claims: Claims | None
) -> RecomputationAnswer:
    """Hold what was recomputed against limits and claims, and say what was found."""
    compared = compare(recomputation, claims or Claims())
    limits_held = judge(recomputation, criteria or Criteria())
    computed = {field.name: getattr(recomputation, field.name) for field in fields(Recomputation)}
    return RecomputationAnswer(
        **computed, findings=limits_held + find(recomputation, compared), claims=compared, engine=engine()
    )


def _recomputation(request: RecomputationRequest) -> Recomputation:
    try:
        return recompute(
            request.plant_model,
            request.controller,
            ranges=request.ranges,
            settling_band_percent=request.settling_band_percent,
            with_curves="curves" in request.include,
            with_second_opinion="second_opinion" in request.include,
        )
    except FieldError as error:
        raise invalid_field(error) from error
