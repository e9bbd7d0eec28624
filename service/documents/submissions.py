"""The request by which a tool submits gains for a loop."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated, Literal

from annotated_types import Len
from pydantic import Field

from service.analysis.errors import FieldError
from service.documents import complete, limits
from service.documents.discriminated import ControllerField
from service.documents.errors import FieldProblem
from service.documents.loops import LoopReference
from service.documents.strict_json import Plain
from service.documents.texts import Line, Moment, Prose
from service.judgement.claims import Claims

KINDS = {
    "planned": "Gains that may be installed once they are approved.",
    "emergency": "Gains installed before their review, which is owed by `review_due_at` of the submission.",
    "baseline": "Gains as they were found in the controller, put on record and approved by nobody.",
    "return": "Gains that were approved for this loop before, recomputed and approved again.",
}
"""What each kind of submission is, in a sentence."""

Kind = Annotated[
    Literal["planned", "emergency", "baseline", "return"],
    Field(description=" ".join(f"`{kind}`: {sentence}" for kind, sentence in KINDS.items())),
]


@dataclass(frozen=True, kw_only=True, slots=True)
class GainSet:
    """One set of scheduled gains: when it holds, and at which operating points it is judged."""

    condition: Line
    """When these gains hold, as the controller or its operator tells it."""
    operating_points: Annotated[tuple[Line, ...], Len(1, limits.OPERATING_POINTS_MAX)]
    """Those of the loop's models with which this set is recomputed."""
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
    kind: Kind
    reason: Prose
    """Why these gains, and what that rests on."""
    safety_effect: Prose
    """What the change means for the safety of the process; if nothing, why. Signed and printed as written."""
    controller: ControllerField | None = None
    gain_sets: Annotated[tuple[GainSet, ...], Len(1, limits.GAIN_SETS_MAX)] | None = None
    """Scheduled gains, in place of one controller."""
    prepared_by: Annotated[tuple[Line, ...], Len(1, limits.PREPARED_BY_MAX)] | None = None
    """Account names; neither they nor the caller may review this. Null: the caller alone."""
    claims: Claims | None = None
    """What the tool has computed, to be held against what is recomputed here."""
    tool: Tool | None = None
    temporary_until: Moment | None = None
    """When a temporary change ends; gains that still run after it are overdue."""
    install_by: Moment | None = None
    """Until when an approval can be used; after it the approval has expired."""

    def __post_init__(self) -> None:
        if (self.controller is None) == (self.gain_sets is None):
            raise FieldError(("controller",), "give a controller, or gain_sets in its place")

    @staticmethod
    def missing(plain: Plain) -> Iterator[FieldProblem]:
        """Name what its controllers lack for a record."""
        return complete.missing_in(plain, ("controller",))
