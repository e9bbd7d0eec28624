"""Changes of what approvals rest on: proposed by one person, confirmed by another.

A confirmed change is one entry of the history with all that follows from it: the loop's next revision or the
retired operating point, the gains that are due for a recheck, and what awaits review, recomputed.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from hashlib import sha256
from uuid import uuid4

from sqlalchemy.orm import Session

from service.documents.canonical import canonical_bytes
from service.documents.changes import ChangeDecisionRequest, LoopChangeRequest
from service.documents.errors import FieldProblem
from service.documents.writing import plain
from service.records import (
    accounts,
    change_consequences,
    change_lifecycle,
    history,
    loops,
    protection,
    signing,
    throttles,
)
from service.records.basis import Basis, present_basis
from service.records.change_consequences import Again, Consequences
from service.records.change_lifecycle import ChangeAction
from service.records.change_queries import find
from service.records.content import ChangeDecisionContent, LoopChangeContent, SignedModel
from service.records.errors import (
    Conflict,
    FieldErrors,
    NotIndependent,
    SigningRefused,
    StaleContent,
)
from service.records.event_kinds import EventKind
from service.records.roles import Actor
from service.records.tables.changes import LoopChange, LoopChangeDecision
from service.records.views import ChangeView

MEANINGS: dict[ChangeAction, str] = {
    "confirm": "I have read this change of what approvals of the loop rest on, and I confirm it.",
    "reject": "I have read this change and reject it.",
    "withdraw": "I take back this change, which I proposed.",
}
"""What a signature means (21 CFR 11.50), by decision."""

KINDS: dict[ChangeAction, EventKind] = {
    "confirm": "loop_change_confirmed",
    "reject": "loop_change_rejected",
    "withdraw": "loop_change_withdrawn",
}
"""The kind of entry in the history, by decision."""


@dataclass(frozen=True, kw_only=True, slots=True)
class PreparedDecision:
    """A decision with everything recomputed that a confirmation calls for. Its inside is the records' own."""

    request: ChangeDecisionRequest
    basis: Basis | None
    again: tuple[Again, ...]


def propose(
    session: Session, actor: Actor, loop_id: str, request: LoopChangeRequest, now: datetime
) -> ChangeView:
    """Propose a change for a second person to confirm.

    Raises NotFound, NotAllowed, FieldErrors (nothing would change; what a change of a loop raises; no model
    in force at the operating point), StaleContent.
    """
    loop, present = loops.found(session, actor, loop_id)
    loops.check_may_change(actor)
    before = loops.read_loop(present)
    if request.loop is not None:
        loops.check_document(session, actor, loop, request.loop)
        if request.loop == before:
            raise FieldErrors((FieldProblem("/loop", "this is the loop as it is; nothing would change"),))
    retires = _retired(session, loop_id, request)
    if request.revision != present.revision:
        raise StaleContent(f"the loop is at revision {present.revision} by now")
    content = LoopChangeContent(
        change_id=uuid4().hex,
        loop_id=loop_id,
        loop_revision=present.revision,
        before=before,
        after=request.loop,
        retires=retires,
        needs_second_person=(
            protection.protected(before, request.loop)
            if request.loop is not None
            else (protection.retirement(request.retire_operating_point or ""),)
        ),
        reason=request.reason,
        proposed_by=signing.person(actor),
        proposed_at=now,
    )
    kept = canonical_bytes(plain(content))
    row = LoopChange(
        id=content.change_id,
        loop_id=loop_id,
        loop_revision=content.loop_revision,
        retires_model_id=retires.id if retires else None,
        proposed_by=actor.account_id,
        proposed_at=now,
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )
    history.append(
        session,
        kind="loop_change_proposed",
        actor=actor,
        about=loops.about(loop, present),
        content={"change": content, "content_digest": row.content_digest},
        now=now,
        rows=(row,),
    )
    return find(session, actor, row.id)


def check_may_decide(session: Session, actor: Actor, change_id: str, decision: ChangeAction | None) -> None:
    """Raise NotFound or NotAllowed for whoever has no part in this change, or none in this decision.

    `decision` None: before the document is read.
    """
    find(session, actor, change_id)
    proposed_by = session.get_one(LoopChange, change_id).proposed_by
    if decision is not None:
        change_lifecycle.check_who(decision, actor, proposed_by)
    elif actor.account_id != proposed_by:
        change_lifecycle.check_who("reject", actor, proposed_by)


def prepare(
    session: Session, actor: Actor, change_id: str, request: ChangeDecisionRequest, now: datetime
) -> PreparedDecision:
    """Recompute what a confirmation calls for; for any other decision, or one that cannot stand, nothing.

    Reads only, so that recomputations of seconds hold up no other writer.
    """
    view = find(session, actor, change_id)
    check_may_decide(session, actor, change_id, request.decision)
    stands = request.content_digest == view.content_digest
    if request.decision != "confirm" or not stands or not change_lifecycle.allows(view.state, "confirm"):
        return PreparedDecision(request=request, basis=None, again=())
    return PreparedDecision(
        request=request,
        basis=present_basis(session, view.content.loop_id),
        again=change_consequences.recomputed(session, view.content, now),
    )


def decide(
    session: Session, actor: Actor, change_id: str, prepared: PreparedDecision, now: datetime
) -> ChangeView:
    """Sign a decision on exactly the change that was read; a confirmed one takes effect at once.

    Raises, in this order: NotFound; NotAllowed (NotIndependent, and SigningRefused for the password, leave a
    trace: the caller rolls back and calls `record_refused_signing`); StaleContent; Conflict (the loop moved
    since the change was proposed, or it has been decided; what was recomputed moved meanwhile).
    """
    view, request = find(session, actor, change_id), prepared.request
    check_may_decide(session, actor, change_id, request.decision)
    accounts.check_password(session, actor, request.password, now)
    if request.content_digest != view.content_digest:
        raise StaleContent("the change is not the one that was read; read it again")
    change_lifecycle.check(view.state, request.decision)
    throttles.forget(session, throttles.of_account(actor.name))
    follows = Consequences(rows=(), told={}, revision=None)
    if request.decision == "confirm":
        _check_still_the_same(session, view.content, prepared, now)
        follows = change_consequences.of_change(session, view.content, prepared.again, now)
    content, row = _decision(actor, view, request, now)
    loop, present = loops.present(session, view.content.loop_id)
    history.append(
        session,
        kind=KINDS[request.decision],
        actor=actor,
        about=loops.about(loop, follows.revision or present),
        content={"decision": content} | follows.told,
        now=now,
        rows=(row, *follows.rows),
    )
    return find(session, actor, change_id)


def record_refused_signing(
    session: Session,
    actor: Actor,
    change_id: str,
    refusal: SigningRefused | NotIndependent,
    now: datetime,
) -> None:
    """Leave the trace of a decision on a change whose signature was refused: see `signing.record_refused`."""
    loop_id = find(session, actor, change_id).content.loop_id
    signing.record_refused(session, actor, loop_id, {"change_id": change_id}, refusal, now)


def _retired(session: Session, loop_id: str, request: LoopChangeRequest) -> SignedModel | None:
    if request.retire_operating_point is None:
        return None
    key = loops.matching_key(request.retire_operating_point)
    for row in loops.models_in_force(session, loop_id):
        if row.operating_point_key == key:
            return SignedModel(id=row.id, version=row.version, model=loops.read_model(row))
    detail = "there is no model in force at this operating point"
    raise FieldErrors((FieldProblem("/retire_operating_point", detail),))


def _check_still_the_same(
    session: Session, change: LoopChangeContent, prepared: PreparedDecision, now: datetime
) -> None:
    awaiting = [submission_id for submission_id, _ in change_consequences.awaiting(session, change, now)]
    same = present_basis(session, change.loop_id) == prepared.basis
    if not same or awaiting != [each.submission_id for each in prepared.again]:
        raise Conflict("while what awaits review was recomputed, the loop's records moved; decide again")


def _decision(
    actor: Actor, view: ChangeView, request: ChangeDecisionRequest, now: datetime
) -> tuple[ChangeDecisionContent, LoopChangeDecision]:
    content = ChangeDecisionContent(
        change_id=view.id,
        decision=request.decision,
        meaning=MEANINGS[request.decision],
        reason=request.reason,
        content_digest=view.content_digest,
        signed_by=signing.person(actor),
        signed_at=now,
    )
    kept = canonical_bytes(plain(content))
    row = LoopChangeDecision(
        change_id=view.id,
        decision=request.decision,
        decided_by=actor.account_id,
        decided_at=now,
        change_digest=view.content_digest,
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )
    return content, row
