"""The requests by which a change of what approvals rest on is proposed, and decided by a second person."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Literal

from annotated_types import Ge, Len

from service.analysis.errors import FieldError
from service.documents import limits
from service.documents.decisions import Digest
from service.documents.loops import LoopRegistration
from service.documents.texts import Line, Prose


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopChangeRequest:
    """A loop as it is to be, or an operating point to be retired; it holds once another person confirms."""

    revision: Annotated[int, Ge(1)]
    """The loop's revision that the change was made from."""
    reason: Prose
    loop: LoopRegistration | None = None
    """The whole loop as it is to be."""
    retire_operating_point: Line | None = None
    """The operating point whose model is taken out of force."""

    def __post_init__(self) -> None:
        if (self.loop is None) == (self.retire_operating_point is None):
            raise FieldError(
                ("loop",), "give the loop as it is to be, or retire_operating_point in its place"
            )


@dataclass(frozen=True, kw_only=True, slots=True)
class ChangeDecisionRequest:
    """A decision on exactly the change that was read, signed with the person's own password."""

    decision: Literal["confirm", "reject", "withdraw"]
    reason: Prose
    content_digest: Digest
    """That of the change as it was read."""
    password: Annotated[str, Len(1, limits.PASSWORD_CHARACTERS_MAX)] = field(repr=False)
