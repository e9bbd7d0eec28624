"""The request by which a person decides about a submission and signs."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Literal

from annotated_types import Len
from pydantic import StringConstraints

from service.analysis.errors import FieldError
from service.documents import limits
from service.documents.texts import Line, Prose

Digest = Annotated[str, StringConstraints(pattern=r"^[0-9a-f]{64}$")]
"""SHA-256 as 64 lower-case hex digits."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Deviation:
    """Why one criterion that was not met or not assessed, or one finding that asks for it, is accepted."""

    criterion: Line
    """Its name, one of `deviations_needed` of the submission."""
    reason: Prose


@dataclass(frozen=True, kw_only=True, slots=True)
class DecisionRequest:
    """A decision on exactly the content that was reviewed, signed with the person's own password."""

    decision: Literal["approve", "reject", "withdraw", "revoke"]
    reason: Prose
    content_digest: Digest
    """That of the submission as it was read."""
    password: Annotated[str, Len(1, limits.PASSWORD_CHARACTERS_MAX)] = field(repr=False)
    deviation: Annotated[tuple[Deviation, ...], Len(0, limits.DEVIATIONS_MAX)] = ()
    """With an approval: one for each of `deviations_needed`; with anything else none."""

    def __post_init__(self) -> None:
        named: set[str] = set()
        for index, deviation in enumerate(self.deviation):
            if deviation.criterion in named:
                raise FieldError(("deviation", index, "criterion"), "one deviation for each criterion")
            named.add(deviation.criterion)
