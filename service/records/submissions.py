"""Gains submitted for a loop: recomputed at every operating point in force, then kept whole with a digest."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from hashlib import sha256
from uuid import uuid4

from sqlalchemy import bindparam, select
from sqlalchemy.orm import Session

from service.analysis.errors import FieldError
from service.documents.canonical import canonical_bytes
from service.documents.errors import FieldProblem, pointer
from service.documents.loops import LoopRegistration
from service.documents.submissions import SubmissionRequest
from service.documents.writing import plain
from service.records import (
    approvability,
    gain_sets,
    history,
    lifecycle,
    loops,
    present_content,
    queries,
    recomputing,
    signing,
    states,
)
from service.records.basis import Basis, models_in_force, present_basis, read_basis
from service.records.content import (
    Person,
    SignedContent,
    SignedGains,
    SignedGainsInForce,
    SignedModel,
    SignedRecomputation,
    read_content,
)
from service.records.errors import BasisChanged, Conflict, FieldErrors
from service.records.recomputing import Recomputed
from service.records.roles import Actor, require_role
from service.records.tables.accounts import Account
from service.records.tables.columns import Base
from service.records.tables.submissions import (
    Submission,
    SubmissionAuthor,
    SubmissionState,
)
from service.records.views import LoopView, SubmissionView

_ACCOUNTS = select(Account.id, Account.name, Account.full_name).where(
    Account.name.in_(bindparam("names", expanding=True))
)


@dataclass(frozen=True, slots=True)
class _Author:
    account_id: str
    person: Person


@dataclass(frozen=True, kw_only=True, slots=True)
class PreparedSubmission:
    """A submission with everything recomputed, ready to be kept. Its inside is the records' own."""

    request: SubmissionRequest
    loop: LoopView
    gain_sets: tuple[SignedGains, ...]
    authors: tuple[_Author, ...]
    """Whoever prepared it."""
    models: tuple[SignedModel, ...]
    recomputed: tuple[Recomputed, ...]
    gains_in_force: SignedGainsInForce | None
    basis: Basis

    @property
    def recomputations(self) -> tuple[SignedRecomputation, ...]:
        """The recomputations as they are signed."""
        return tuple(each.signed for each in self.recomputed)


def check_may_submit(actor: Actor) -> None:
    """Raise NotAllowed unless the actor may submit gains."""
    require_role(actor, "submitter")


def prepare(session: Session, actor: Actor, request: SubmissionRequest, now: datetime) -> PreparedSubmission:
    """Recompute what is submitted, at every operating point in force. Reads only.

    It is apart from `submit` so that a recomputation of seconds holds up no other writer. Raises NotFound (no
    such loop), NotAllowed, FieldErrors, Conflict (a baseline of gains that are in force).
    """
    loop = loops.find_by_tag(session, actor, request.loop.site, request.loop.tag)
    check_may_submit(actor)
    sets = gain_sets.of_request(request)
    models = models_in_force(session, loop.id)
    authors = _authors(session, actor, request)
    _check_fields(session, request, loop, sets, models, now)
    in_force = present_content.gains_in_force(session, loop.id)
    _check_baseline(request, loop.loop, sets, in_force)
    recomputed = tuple(
        _recompute(loop.loop, model, index, sets[index], request)
        for index in range(len(sets))
        for model in gain_sets.models_for(sets[index], models)
    )
    return PreparedSubmission(
        request=request,
        loop=loop,
        gain_sets=sets,
        authors=authors,
        models=models,
        recomputed=recomputed,
        gains_in_force=in_force,
        basis=read_basis(loop, models, in_force),
    )


def submit(session: Session, actor: Actor, prepared: PreparedSubmission, now: datetime) -> SubmissionView:
    """Keep a prepared submission.

    Raises Conflict where the loop, its models or the gains in force changed meanwhile: prepare again.
    """
    check_may_submit(actor)
    changed = prepared.basis.changed(present_basis(session, prepared.loop.id))
    if changed:
        raise BasisChanged(changed)
    content = _content(actor, prepared, now)
    kept = canonical_bytes(plain(content))
    submission = _submission(actor, prepared, content, kept)
    state = lifecycle.START[content.kind]
    outcome = states.Outcome((), None)
    if content.kind in lifecycle.IN_FORCE_FROM_THE_START:
        outcome = states.coming_into_force(session, content.loop_id, content.submission_id, now, now)
    loop, revision = loops.present(session, content.loop_id)
    history.append(
        session,
        kind="gains_submitted",
        actor=actor,
        about=loops.about(loop, revision),
        content=_told(content, submission, state, outcome.superseded),
        now=now,
        rows=(
            submission,
            *_author_rows(actor, prepared, submission.id),
            *recomputing.rows(submission.id, 0, prepared.recomputed),
            states.first(submission.id, state),
            *outcome.rows,
        ),
    )
    return queries.submission(session, actor, submission.id, now)


def _authors(session: Session, actor: Actor, request: SubmissionRequest) -> tuple[_Author, ...]:
    names = tuple(dict.fromkeys(request.prepared_by or (actor.name,)))
    found = {
        name: _Author(account_id, Person(name=name, full_name=full_name))
        for account_id, name, full_name in session.execute(_ACCOUNTS, {"names": names})
    }
    problems = tuple(
        FieldProblem(f"/prepared_by/{index}", "there is no such account")
        for index, name in enumerate(request.prepared_by or ())
        if name not in found
    )
    if problems:
        raise FieldErrors(problems)
    return tuple(found[name] for name in names)


def _check_fields(
    session: Session,
    request: SubmissionRequest,
    loop: LoopView,
    sets: tuple[SignedGains, ...],
    models: tuple[SignedModel, ...],
    now: datetime,
) -> None:
    problems = [*_time_problems(request, now), *gain_sets.problems(request, models)]
    if request.kind == "return" and not _was_approved(session, loop, sets):
        place = "/controller" if request.controller is not None else "/gain_sets"
        problems.append(
            FieldProblem(place, "a return goes back to gains that were approved for this loop before")
        )
    if problems:
        raise FieldErrors(tuple(problems))


def _time_problems(request: SubmissionRequest, now: datetime) -> list[FieldProblem]:
    problems = []
    for name in ("temporary_until", "install_by"):
        moment: datetime | None = getattr(request, name)
        if moment is not None and moment <= now:
            problems.append(FieldProblem(f"/{name}", "this time is past"))
    runs_already = request.kind in lifecycle.IN_FORCE_FROM_THE_START
    if runs_already and request.install_by is not None:
        problems.append(FieldProblem("/install_by", "these gains are in the controller already"))
    if request.kind == "baseline" and request.temporary_until is not None:
        problems.append(FieldProblem("/temporary_until", "gains that were found are not temporary"))
    return problems


def _was_approved(session: Session, loop: LoopView, sets: tuple[SignedGains, ...]) -> bool:
    query = (
        select(Submission)
        .join(SubmissionState, SubmissionState.submission_id == Submission.id)
        .where(Submission.loop_id == loop.id, SubmissionState.action == "approve")
        .order_by(Submission.event_number.desc())
    )
    contents = (read_content(row.content) for row in session.execute(query).scalars().unique())
    return any(gain_sets.same(content.gain_sets, sets, loops.ranges(loop.loop)) for content in contents)


def _check_baseline(
    request: SubmissionRequest,
    loop: LoopRegistration,
    sets: tuple[SignedGains, ...],
    in_force: SignedGainsInForce | None,
) -> None:
    # recorded as found, they would take the place of the same gains with their approval
    found = in_force.gain_sets if request.kind == "baseline" and in_force is not None else ()
    if found and gain_sets.same(found, sets, loops.ranges(loop)):
        raise Conflict("these are the gains in force already")


def _recompute(
    loop: LoopRegistration,
    model: SignedModel,
    index: int,
    gain_set: SignedGains,
    request: SubmissionRequest,
) -> Recomputed:
    try:
        return recomputing.recomputed(loop, model, index, gain_set, request.claims)
    except FieldError as error:
        raise FieldErrors((_problem_of_recomputation(error, model, index, request),)) from None


def _problem_of_recomputation(
    error: FieldError, model: SignedModel, index: int, request: SubmissionRequest
) -> FieldProblem:
    if error.path[:1] == ("controller",):
        place = ("controller",) if request.controller is not None else ("gain_sets", index, "controller")
        return FieldProblem(pointer((*place, *error.path[1:])), error.detail)
    at = f"with the model at operating point {model.model.operating_point}"
    return FieldProblem("/loop", f"{at} the loop cannot be recomputed: {error.detail}")


def _content(actor: Actor, prepared: PreparedSubmission, now: datetime) -> SignedContent:
    request, loop = prepared.request, prepared.loop
    return SignedContent(
        submission_id=uuid4().hex,
        loop_id=loop.id,
        loop_revision=loop.revision,
        loop=loop.loop,
        kind=request.kind,
        reason=request.reason,
        safety_effect=request.safety_effect,
        gain_sets=prepared.gain_sets,
        submitted_by=signing.person(actor),
        submitted_at=now,
        prepared_by=tuple(author.person for author in prepared.authors),
        tool=request.tool,
        claims=request.claims,
        temporary_until=request.temporary_until,
        install_by=request.install_by,
        models=prepared.models,
        criteria_source=recomputing.criteria_source(loop.loop),
        criteria=approvability.worst_criteria(prepared.recomputations),
        recomputations=prepared.recomputations,
        gains_in_force=prepared.gains_in_force,
    )


def _submission(
    actor: Actor, prepared: PreparedSubmission, content: SignedContent, kept: bytes
) -> Submission:
    return Submission(
        id=content.submission_id,
        loop_id=content.loop_id,
        loop_revision=content.loop_revision,
        kind=content.kind,
        reason=content.reason,
        submitted_by=actor.account_id,
        submitted_by_name=actor.name,
        submitted_by_full_name=actor.full_name,
        submitted_at=content.submitted_at,
        install_by=content.install_by,
        temporary_until=content.temporary_until,
        verdict=approvability.worst_verdict(prepared.recomputations),
        content=kept,
        content_digest=sha256(kept).hexdigest(),
    )


def _author_rows(actor: Actor, prepared: PreparedSubmission, submission_id: str) -> tuple[Base, ...]:
    ids = dict.fromkeys((actor.account_id, *(author.account_id for author in prepared.authors)))
    return tuple(SubmissionAuthor(submission_id=submission_id, account_id=account_id) for account_id in ids)


def _told(
    content: SignedContent, submission: Submission, state: str, superseded: str | None
) -> dict[str, object]:
    return {
        "submission_id": content.submission_id,
        "content_digest": submission.content_digest,
        "kind": content.kind,
        "reason": content.reason,
        "safety_effect": content.safety_effect,
        "gain_sets": content.gain_sets,
        "submitted_by": content.submitted_by,
        "prepared_by": content.prepared_by,
        "temporary_until": content.temporary_until,
        "install_by": content.install_by,
        "verdict": submission.verdict,
        "state": state,
        "supersedes": superseded,
    }
