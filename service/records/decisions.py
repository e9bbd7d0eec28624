"""Decisions and their signatures: approve, reject, withdraw, revoke. Each is final."""

from __future__ import annotations

from datetime import datetime
from hashlib import sha256
from uuid import uuid4

from sqlalchemy import bindparam, select
from sqlalchemy.orm import Session

from service.documents.canonical import canonical_bytes
from service.documents.decisions import DecisionRequest
from service.documents.errors import FieldProblem
from service.documents.writing import plain
from service.records import (
    accounts,
    approvability,
    basis,
    history,
    lifecycle,
    loops,
    present_content,
    signing,
    states,
    throttles,
    visibility,
)
from service.records.content import DecisionContent, SignedContent
from service.records.errors import (
    BasisChanged,
    FieldErrors,
    MissingDeviation,
    NotApprovable,
    NotIndependent,
    SigningRefused,
    StaleContent,
)
from service.records.event_kinds import EventKind
from service.records.lifecycle import Action
from service.records.roles import Actor, require_role
from service.records.tables.submissions import Decision, Submission, SubmissionState
from service.records.views import DecisionView

MEANINGS = {
    "approve": "I have reviewed these gains and what was recomputed, and I approve them for this loop.",
    "reject": "I have reviewed these gains and reject them.",
    "withdraw": "I take back these gains, which I submitted or prepared.",
    "revoke": "I revoke the approval of these gains.",
}
"""What a signature means (21 CFR 11.50), by decision."""

KINDS: dict[Action, EventKind] = {
    "approve": "gains_approved",
    "reject": "gains_rejected",
    "withdraw": "gains_withdrawn",
    "revoke": "approval_revoked",
}
"""The kind of entry in the history, by decision."""

_OF_SUBMISSION = (
    select(Decision).where(Decision.submission_id == bindparam("submission_id")).order_by(Decision.ordinal)
)


def check_may_decide(session: Session, actor: Actor, submission_id: str) -> None:
    """Raise NotFound or NotAllowed before the document is read: no such submission, no role that decides."""
    visibility.submission(session, actor, submission_id)
    if actor.account_id not in visibility.authors(session, submission_id):
        require_role(actor, approvability.APPROVER)


def decide(
    session: Session, actor: Actor, submission_id: str, request: DecisionRequest, now: datetime
) -> DecisionView:
    """Sign a decision on exactly the content that was reviewed.

    Raises, in this order: NotFound; NotAllowed (NotIndependent, and SigningRefused for the password, leave a
    trace: the caller rolls back and calls `record_refused_signing` in a transaction of its own); FieldErrors
    (MissingDeviation); StaleContent (another digest); Conflict (WrongStep, BasisChanged, NotApprovable).
    """
    submission = visibility.submission(session, actor, submission_id)
    present = present_content.present(session, submission)
    earlier = _decisions(session, submission_id)
    approvals = _approvals(earlier, present.digest)
    lifecycle.check_who(request.decision, actor, visibility.authors(session, submission_id))
    if lifecycle.allows(states.as_read(session, submission, now), request.decision):
        _check_signs_once(actor, request, approvals)
    accounts.check_password(session, actor, request.password, now)
    content = present.read()
    _check_deviations(request, content)
    if request.content_digest != present.digest:
        raise StaleContent("the content is not the one that was reviewed; read it again")
    state = states.next_row(session, submission, _action(request, content, approvals), now)
    if request.decision == "approve":
        _check_approvable(session, content)
    throttles.forget(session, throttles.of_account(actor.name))
    return _sign(session, actor, submission, request, state, len(earlier), now)


def record_refused_signing(
    session: Session,
    actor: Actor,
    submission_id: str,
    refusal: SigningRefused | NotIndependent,
    now: datetime,
) -> None:
    """Leave the trace of a decision whose signature was refused: see `signing.record_refused`."""
    loop_id = visibility.submission(session, actor, submission_id).loop_id
    signing.record_refused(session, actor, loop_id, {"submission_id": submission_id}, refusal, now)


def _decisions(session: Session, submission_id: str) -> tuple[Decision, ...]:
    return tuple(session.execute(_OF_SUBMISSION, {"submission_id": submission_id}).scalars())


def _approvals(decisions: tuple[Decision, ...], digest: str) -> tuple[Decision, ...]:
    """Keep the approvals of exactly this content: one that was recomputed since is approved anew."""
    return tuple(row for row in decisions if (row.decision, row.submission_digest) == ("approve", digest))


def _check_signs_once(actor: Actor, request: DecisionRequest, approvals: tuple[Decision, ...]) -> None:
    signed = {row.decided_by for row in approvals}
    if request.decision == "approve" and actor.account_id in signed:
        raise NotIndependent("you have approved this; the second approval is another person's")


def _check_deviations(request: DecisionRequest, content: SignedContent) -> None:
    needed = approvability.deviations_needed(content) if request.decision == "approve" else ()
    given = [deviation.criterion for deviation in request.deviation]
    missing = tuple(
        FieldProblem(
            "/deviation", f"{name} is not met or not assessed: an approval states why it is accepted"
        )
        for name in needed
        if name not in given
    )
    idle = tuple(
        FieldProblem(f"/deviation/{index}/criterion", "there is nothing to deviate from here")
        for index, name in enumerate(given)
        if name not in needed
    )
    if missing:
        raise MissingDeviation((*missing, *idle))
    if idle:
        raise FieldErrors(idle)


def _action(request: DecisionRequest, content: SignedContent, approvals: tuple[Decision, ...]) -> Action:
    if request.decision != "approve":
        return request.decision
    return "approve" if len(approvals) + 1 >= approvability.approvals_needed(content) else "approve_first"


def _check_approvable(session: Session, content: SignedContent) -> None:
    changed = basis.changed_since(session, content)
    if changed:
        raise BasisChanged(changed)
    hindrances = approvability.hindrances(content)
    if hindrances:
        raise NotApprovable(f"this cannot be approved: {'; '.join(hindrances)}")


def _sign(
    session: Session,
    actor: Actor,
    submission: Submission,
    request: DecisionRequest,
    state: SubmissionState,
    ordinal: int,
    now: datetime,
) -> DecisionView:
    content = DecisionContent(
        decision_id=uuid4().hex,
        submission_id=submission.id,
        decision=request.decision,
        meaning=MEANINGS[request.decision],
        reason=request.reason,
        deviation=request.deviation,
        content_digest=request.content_digest,
        signed_by=signing.person(actor),
        signed_at=now,
    )
    kept = canonical_bytes(plain(content))
    row = Decision(
        id=content.decision_id,
        submission_id=submission.id,
        ordinal=ordinal,
        decision=request.decision,
        decided_by=actor.account_id,
        decided_at=now,
        submission_digest=request.content_digest,
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )
    entry = history.append(
        session,
        kind=KINDS[request.decision],
        actor=actor,
        about=loops.about(*loops.present(session, submission.loop_id)),
        content={"decision": content, "state": state.state},
        now=now,
        rows=(row, state),
    )
    return DecisionView(decision=content, entry=entry)
