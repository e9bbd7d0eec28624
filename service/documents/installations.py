"""The request by which the gains on the controller's own display are recorded."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from service.documents import complete
from service.documents.discriminated import ControllerField
from service.documents.errors import FieldProblem
from service.documents.strict_json import Plain
from service.documents.texts import Line, Moment


@dataclass(frozen=True, kw_only=True, slots=True)
class InstallationRequest:
    """Gains as found and as left at the controller, and who was there."""

    as_found: ControllerField
    as_left: ControllerField
    installed_at: Moment
    typed_by: Line | None = None
    read_back_by: Line | None = None
    operator: Line | None = None
    saved_to_engineering_database: bool | None = None

    @staticmethod
    def missing(plain: Plain) -> Iterator[FieldProblem]:
        """Name what its controllers lack for a record."""
        return complete.missing_in(plain, ("as_found", "as_left"))
