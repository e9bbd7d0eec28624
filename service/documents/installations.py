"""The request by which the gains on the controller's own display are recorded."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated

from annotated_types import Len

from service.analysis.controller import Controller
from service.analysis.errors import FieldError
from service.documents import complete, limits
from service.documents.discriminated import ControllerField
from service.documents.errors import FieldProblem
from service.documents.strict_json import Plain
from service.documents.texts import Line, Moment


@dataclass(frozen=True, kw_only=True, slots=True)
class InstalledGainSet:
    """One set of scheduled gains as found and as left, named by its condition."""

    condition: Line
    """That of an approved set."""
    as_found: ControllerField
    as_left: ControllerField


@dataclass(frozen=True, kw_only=True, slots=True)
class InstallationRequest:
    """Gains as found and as left at the controller, and who was there.

    One controller, or in its place those sets of a scheduled loop that were looked at.
    """

    installed_at: Moment
    as_found: ControllerField | None = None
    """As it stood on the controller's own display before anything was typed."""
    as_left: ControllerField | None = None
    """As it stands there now, whether or not it is what was approved."""
    gain_sets: Annotated[tuple[InstalledGainSet, ...], Len(1, limits.GAIN_SETS_MAX)] | None = None
    typed_by: Line | None = None
    read_back_by: Line | None = None
    operator: Line | None = None
    saved_to_engineering_database: bool | None = None
    """True: there too, so that a later download to the controller does not undo them. Null: not known."""

    def __post_init__(self) -> None:
        for name in ("as_found", "as_left"):
            if (getattr(self, name) is None) == (self.gain_sets is None):
                raise FieldError((name,), "give as_found and as_left, or gain_sets in their place")

    def lefts(self) -> tuple[Controller, ...]:
        """Return every controller as left, in the order in which they were named."""
        if self.gain_sets is not None:
            return tuple(each.as_left for each in self.gain_sets)
        return () if self.as_left is None else (self.as_left,)

    @staticmethod
    def missing(plain: Plain) -> Iterator[FieldProblem]:
        """Name what its controllers lack for a record."""
        return complete.missing_in(plain, ("as_found", "as_left"))
