"""The requests by which a loop and its models are made known."""

from __future__ import annotations

from dataclasses import dataclass, fields

from service.analysis.errors import FieldError
from service.analysis.plant import Range
from service.documents.discriminated import PlantModelField
from service.documents.texts import Line, Prose, Tag
from service.judgement.criteria import Criteria


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopReference:
    """A loop by its site and tag."""

    site: Tag
    tag: Tag

    def names(self, site: str, tag: str) -> bool:
        """Say whether these are the same site and tag; case makes no difference."""
        return (self.site.casefold(), self.tag.casefold()) == (site.casefold(), tag.casefold())


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopRegistration:
    """A loop as it is registered; a later one for the same loop is a new revision."""

    site: Tag
    tag: Tag
    description: Line
    area: Line
    """Whoever is kept to areas sees the loops of these alone."""
    pv: Range
    output: Range
    service_class: Line | None = None
    """What the loop is for, as the site names it."""
    safety_related: bool = False
    """Its gains take two approvals, by two people."""
    criteria: Criteria | None = None
    """Its own limits; null: the service's floors hold."""
    inner_loop: LoopReference | None = None
    """The secondary loop of a cascade whose set point this loop's output is."""
    fail_position: Line | None = None
    """Where the valve goes without air or signal, as the site writes it."""

    def __post_init__(self) -> None:
        if self.inner_loop and self.inner_loop.names(self.site, self.tag):
            raise FieldError(("inner_loop",), "a loop is not its own inner loop")

    @property
    def own_criteria(self) -> Criteria | None:
        """The loop's own limits; an empty set of limits is none."""
        return None if self.criteria == Criteria() else self.criteria


@dataclass(frozen=True, kw_only=True, slots=True)
class RevisedLoop(LoopRegistration):
    """A loop as it is from now on, and why it was changed."""

    reason: Prose

    @property
    def loop(self) -> LoopRegistration:
        """The loop itself."""
        return LoopRegistration(
            **{field.name: getattr(self, field.name) for field in fields(LoopRegistration)}
        )


@dataclass(frozen=True, kw_only=True, slots=True)
class ModelVersion:
    """A plant model for one operating point, and what it rests on."""

    plant_model: PlantModelField
    operating_point: Line
    """A later version at the same one takes this one's place."""
    evidence: Prose
    """What the model rests on: the test that was made, when, and where its data is kept."""
