"""The request by which a tool submits gains for a loop."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated, Literal

from annotated_types import Len

from service.analysis.errors import FieldError
from service.documents import complete, limits
from service.documents.discriminated import ControllerField
from service.documents.errors import FieldProblem
from service.documents.loops import LoopReference
from service.documents.strict_json import Plain
from service.documents.texts import Line, Moment, Prose
from service.judgement.claims import Claims


@dataclass(frozen=True, kw_only=True, slots=True)
class GainSet:
    """One set of scheduled gains: when it holds, and at which operating points it is judged."""

    condition: Line
    operating_points: Annotated[tuple[Line, ...], Len(1, limits.OPERATING_POINTS_MAX)]
    controller: ControllerField


@dataclass(frozen=True, kw_only=True, slots=True)
class Tool:
    """The program that submits."""

    name: Line
    version: Line


@dataclass(frozen=True, kw_only=True, slots=True)
class SubmissionRequest:
    """Gains for a loop, with the reason and the effect on safety; every controller is complete."""

    loop: LoopReference
    kind: Literal["planned", "emergency", "baseline", "return"]
    reason: Prose
    safety_effect: Prose
    controller: ControllerField | None = None
    gain_sets: Annotated[tuple[GainSet, ...], Len(1, limits.GAIN_SETS_MAX)] | None = None
    prepared_by: Annotated[tuple[Line, ...], Len(1, limits.PREPARED_BY_MAX)] | None = None
    """Account names; None: the caller."""
    claims: Claims | None = None
    tool: Tool | None = None
    temporary_until: Moment | None = None
    install_by: Moment | None = None

    def __post_init__(self) -> None:
        if (self.controller is None) == (self.gain_sets is None):
            raise FieldError(("controller",), "give a controller, or gain_sets in its place")

    @staticmethod
    def missing(plain: Plain) -> Iterator[FieldProblem]:
        """Name what its controllers lack for a record."""
        return complete.missing_in(plain, ("controller",))
