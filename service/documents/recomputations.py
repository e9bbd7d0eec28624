"""One recomputation without a record: the request, and the answer in the shape that is sent."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Literal

from annotated_types import Ge, Le, Len

from service.analysis.plant import Ranges
from service.analysis.results import Recomputation
from service.documents import limits
from service.documents.discriminated import ControllerField, PlantModelField
from service.documents.engine import Engine
from service.judgement.claims import ClaimFinding, Claims
from service.judgement.criteria import Criteria, CriterionFinding
from service.judgement.findings import Finding

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
    """Everything that was recomputed, and what it means against limits and claims."""

    recomputation: Recomputation
    criteria: tuple[CriterionFinding, ...]
    findings: tuple[Finding, ...]
    claims: tuple[ClaimFinding, ...]
    engine: Engine
