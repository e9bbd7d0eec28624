"""What a recomputation rests on, as it is now, to be held against what it was."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from sqlalchemy.orm import Session

from service.records import loops, states
from service.records.content import SignedContent, SignedGainsInForce, SignedModel
from service.records.views import LoopView


@dataclass(frozen=True, kw_only=True, slots=True)
class Basis:
    """A loop's revision (ranges, action of the valve, criteria), its models in force and its gains in
    force.
    """

    loop_revision: int
    criteria: object
    models: frozenset[str]
    gains_in_force: str | None

    def changed(self, present: Basis) -> tuple[str, ...]:
        """Name in words what is otherwise in `present`."""
        return tuple(self._changed(present))

    def _changed(self, present: Basis) -> Iterator[str]:
        if self.criteria != present.criteria:
            yield "the criteria"
        elif self.loop_revision != present.loop_revision:
            yield "the loop's own data"
        if self.models != present.models:
            yield "the plant models"
        if self.gains_in_force != present.gains_in_force:
            yield "the gains in force"


def models_in_force(session: Session, loop_id: str) -> tuple[SignedModel, ...]:
    """Return the models that a recomputation of this loop is made from now."""
    return tuple(
        SignedModel(id=row.id, version=row.version, model=loops.read_model(row))
        for row in loops.models_in_force(session, loop_id)
    )


def present_basis(session: Session, loop_id: str) -> Basis:
    """Return what a recomputation of this loop rests on now."""
    _, revision = loops.present(session, loop_id)
    running = states.running(session, loop_id)
    return Basis(
        loop_revision=revision.revision,
        criteria=loops.read_loop(revision).criteria,
        models=frozenset(row.id for row in loops.models_in_force(session, loop_id)),
        gains_in_force=running.submission_id if running else None,
    )


def read_basis(
    loop: LoopView, models: tuple[SignedModel, ...], gains_in_force: SignedGainsInForce | None
) -> Basis:
    """Return the same from what was read in this transaction already."""
    return Basis(
        loop_revision=loop.revision,
        criteria=loop.loop.criteria,
        models=frozenset(model.id for model in models),
        gains_in_force=gains_in_force.submission_id if gains_in_force else None,
    )


def changed_since(session: Session, content: SignedContent) -> tuple[str, ...]:
    """Name in words what has changed since a submission was recomputed; its own coming into force aside."""
    present = present_basis(session, content.loop_id)
    then = content.gains_in_force.submission_id if content.gains_in_force else None
    # an emergency change runs before it is reviewed, and others may have taken its place by then
    own = states.has_run(session, content.loop_id, content.submission_id)
    signed = Basis(
        loop_revision=content.loop_revision,
        criteria=content.loop.criteria,
        models=frozenset(model.id for model in content.models),
        gains_in_force=present.gains_in_force if own else then,
    )
    return signed.changed(present)
