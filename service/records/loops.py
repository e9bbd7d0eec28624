"""Loops with their revisions, and their models by operating point.

Each change is a new revision or version.
"""

from __future__ import annotations

import json
import unicodedata
from datetime import datetime
from functools import cache
from hashlib import sha256
from uuid import uuid4

from sqlalchemy import ColumnElement, Row, Select, bindparam, select
from sqlalchemy.orm import Session, aliased

from service.analysis.plant import Ranges
from service.documents.canonical import canonical_bytes
from service.documents.errors import FieldProblem
from service.documents.loops import LoopReference, LoopRegistration, ModelVersion
from service.documents.reading import read_kept
from service.documents.writing import plain
from service.records import history, protection
from service.records.errors import AlreadyExists, FieldErrors, NotFound, SecondPersonNeeded, StaleContent
from service.records.history import About
from service.records.roles import Actor, Role, require_area, require_role
from service.records.tables.history import HistoryEvent
from service.records.tables.loops import Loop, LoopModel, LoopRevision
from service.records.views import EntryReference, LoopView, ModelView

CHANGERS: tuple[Role, ...] = ("submitter", "administrator")
"""Who registers and changes loops and adds models."""

# statements are made once: making one costs more than running it
_LATER = aliased(LoopRevision)
_MODELS = select(LoopModel).where(LoopModel.loop_id == bindparam("loop_id")).order_by(LoopModel.version)
_WRITTEN = select(HistoryEvent.actor, HistoryEvent.number, HistoryEvent.digest, HistoryEvent.time).where(
    HistoryEvent.number == bindparam("number")
)


def matching_key(text: str) -> str:
    """Return how a site, tag or operating point is matched: composed characters, without regard to case."""
    return unicodedata.normalize("NFC", unicodedata.normalize("NFC", text).casefold())


def check_may_change(actor: Actor) -> None:
    """Raise NotAllowed unless the actor may register and change loops and add models."""
    require_role(actor, *CHANGERS)


def may_change(actor: Actor) -> bool:
    """Say whether the actor may."""
    return not actor.roles.isdisjoint(CHANGERS)


def register(session: Session, actor: Actor, document: LoopRegistration, now: datetime) -> LoopView:
    """Register a loop.

    Raises NotAllowed, FieldErrors (an area outside the actor's, an unknown inner loop), AlreadyExists.
    """
    check_may_change(actor)
    _check_references(session, actor, document)
    if _by_tag(session, document.site, document.tag) is not None:
        raise AlreadyExists(f"{document.site} has a loop {document.tag} already")
    loop = Loop(
        id=uuid4().hex,
        site=document.site,
        tag=document.tag,
        site_key=matching_key(document.site),
        tag_key=matching_key(document.tag),
    )
    revision = _revision(loop.id, 1, document)
    entry = history.append(
        session,
        kind="loop_registered",
        actor=actor,
        about=about(loop, revision),
        content={"revision": 1, "loop": document},
        now=now,
        rows=(loop, revision),
    )
    return _view(loop, revision, actor.name, entry)


def change(
    session: Session,
    actor: Actor,
    loop_id: str,
    document: LoopRegistration,
    reason: str,
    revision: int,
    now: datetime,
) -> LoopView:
    """Make a new revision of a loop. `revision` is the one that the change was made from.

    Raises NotFound, NotAllowed, FieldErrors (site and tag stay), StaleContent, SecondPersonNeeded.
    """
    loop, present = found(session, actor, loop_id)
    check_may_change(actor)
    check_document(session, actor, loop, document)
    if revision != present.revision:
        raise StaleContent(f"the loop is at revision {present.revision} by now")
    reasons = protection.protected(read_loop(present), document)
    if reasons:
        raise SecondPersonNeeded(tuple((reason.field, reason.sentence) for reason in reasons))
    latest = next_revision(loop, present, document)
    entry = history.append(
        session,
        kind="loop_changed",
        actor=actor,
        about=about(loop, latest),
        content={
            "revision": latest.revision,
            "reason": reason,
            "before": json.loads(present.content),
            "loop": document,
        },
        now=now,
        rows=(latest,),
    )
    return _view(loop, latest, actor.name, entry)


def check_document(session: Session, actor: Actor, loop: Loop, document: LoopRegistration) -> None:
    """Raise FieldErrors where a document cannot be the next revision of this loop."""
    if (document.site, document.tag) != (loop.site, loop.tag):
        detail = "site and tag are what a loop is known by, and stay; another tag is another loop"
        raise FieldErrors((FieldProblem("/site" if document.site != loop.site else "/tag", detail),))
    _check_references(session, actor, document)


def next_revision(loop: Loop, present: LoopRevision, document: LoopRegistration) -> LoopRevision:
    """Make the row of the revision that follows on the present one."""
    return _revision(loop.id, present.revision + 1, document)


def retirement(session: Session, retired: LoopModel) -> LoopModel:
    """Make the row of the model version from which on an operating point has no model in force."""
    return LoopModel(
        id=uuid4().hex,
        loop_id=retired.loop_id,
        version=len(_models(session, retired.loop_id)) + 1,
        operating_point=retired.operating_point,
        operating_point_key=retired.operating_point_key,
        retired=True,
        content=retired.content,
        content_digest=retired.content_digest,
    )


def find(session: Session, actor: Actor, loop_id: str, revision: int | None = None) -> LoopView:
    """Return a loop at its present or an earlier revision. Raises NotFound."""
    loop, present = found(session, actor, loop_id)
    wanted = present if revision is None else session.get(LoopRevision, (loop_id, revision))
    if wanted is None:
        raise NotFound("there is no such revision")
    return view(session, loop, wanted)


def find_by_tag(session: Session, actor: Actor, site: str, tag: str) -> LoopView:
    """Return a loop by site and tag, without regard to case. Raises NotFound."""
    return view(session, *_in_sight(actor, _by_tag(session, site, tag)))


def revisions(session: Session, actor: Actor, loop_id: str) -> tuple[LoopView, ...]:
    """Return all revisions of a loop, latest first. Raises NotFound."""
    loop, _ = found(session, actor, loop_id)
    query = select(LoopRevision).where(LoopRevision.loop_id == loop_id).order_by(LoopRevision.revision.desc())
    return tuple(view(session, loop, row) for row in session.execute(query).scalars())


def add_model(
    session: Session, actor: Actor, loop_id: str, document: ModelVersion, now: datetime
) -> ModelView:
    """Add a model version; it takes the place of the earlier one of the same operating point.

    Raises NotFound, NotAllowed.
    """
    loop, revision = found(session, actor, loop_id)
    check_may_change(actor)
    content = canonical_bytes(plain(document))
    row = LoopModel(
        id=uuid4().hex,
        loop_id=loop.id,
        version=len(_models(session, loop.id)) + 1,
        operating_point=document.operating_point,
        operating_point_key=matching_key(document.operating_point),
        retired=False,
        content=content,
        content_digest=sha256(content).hexdigest(),
    )
    entry = history.append(
        session,
        kind="model_added",
        actor=actor,
        about=about(loop, revision),
        content={"model_id": row.id, "version": row.version, "model": document},
        now=now,
        rows=(row,),
    )
    return _model_view(row, True, actor.name, entry)


def models(session: Session, actor: Actor, loop_id: str) -> tuple[ModelView, ...]:
    """Return all model versions of a loop, latest first. Raises NotFound."""
    found(session, actor, loop_id)
    rows = _models(session, loop_id)
    in_force = {row.id for row in rows_in_force(rows)}
    return tuple(
        _model_view(row, row.id in in_force, *written_by(session, row.event_number)) for row in reversed(rows)
    )


def model(session: Session, actor: Actor, loop_id: str, model_id: str) -> ModelView:
    """Return one model version. Raises NotFound."""
    found = next((view for view in models(session, actor, loop_id) if view.id == model_id), None)
    if found is None:
        raise NotFound("there is no such model")
    return found


def models_in_force(session: Session, loop_id: str) -> tuple[LoopModel, ...]:
    """Return the model in force at each operating point, in the order in which the points came to be."""
    return rows_in_force(_models(session, loop_id))


def rows_in_force(rows: tuple[LoopModel, ...]) -> tuple[LoopModel, ...]:
    """Of a loop's model versions, earliest first, keep the latest of each operating point that is not
    retired.
    """
    latest: dict[str, LoopModel] = {}
    for row in rows:
        latest[row.operating_point_key] = row
    return tuple(row for row in latest.values() if not row.retired)


def read_model(row: LoopModel) -> ModelVersion:
    """Read a kept model version."""
    return read_kept(ModelVersion, row.content)


def read_loop(row: LoopRevision) -> LoopRegistration:
    """Read a kept revision of a loop."""
    return read_kept(LoopRegistration, row.content)


def ranges(loop: LoopRegistration) -> Ranges:
    """Return a loop's ranges."""
    return Ranges(pv=loop.pv, output=loop.output)


def about(loop: Loop, revision: LoopRevision) -> About:
    """Say which loop an entry of the history is about."""
    return About(loop_id=loop.id, site=loop.site, tag=loop.tag, area=revision.area)


def present(session: Session, loop_id: str) -> tuple[Loop, LoopRevision]:
    """Return a loop and its present revision, whoever asks."""
    loop, revision = session.execute(_loops_by_id(), {"loop_id": loop_id}).one()
    return loop, revision


@cache
def present_revisions() -> Select[Loop]:
    """Select loops joined with their present revision."""
    return select(Loop).join(LoopRevision, LoopRevision.loop_id == Loop.id).where(is_present())


@cache
def is_present() -> ColumnElement[bool]:
    """Return the condition that a selected revision is its loop's present one."""
    superseded = select(_LATER.loop_id).where(
        _LATER.loop_id == LoopRevision.loop_id, _LATER.revision > LoopRevision.revision
    )
    return ~superseded.exists()


def view(session: Session, loop: Loop, revision: LoopRevision) -> LoopView:
    """Return a loop's revision as it is shown."""
    return _view(loop, revision, *written_by(session, revision.event_number))


def written_by(session: Session, event_number: int) -> tuple[str, EntryReference]:
    """Return who wrote an entry of the history, and the reference to it."""
    actor, number, digest, time = session.execute(_WRITTEN, {"number": event_number}).one()
    return actor, EntryReference(number=number, digest=digest, time=time)


def found(session: Session, actor: Actor, loop_id: str) -> tuple[Loop, LoopRevision]:
    """Return a loop in the actor's areas with its present revision. Raises NotFound."""
    return _in_sight(actor, session.execute(_loops_by_id(), {"loop_id": loop_id}).one_or_none())


def _in_sight(actor: Actor, found: Row[Loop, LoopRevision] | None) -> tuple[Loop, LoopRevision]:
    if found is None:
        raise NotFound("there is no such loop")
    loop, revision = found
    require_area(actor, revision.area, "loop")
    return loop, revision


def _by_tag(session: Session, site: str, tag: str) -> Row[Loop, LoopRevision] | None:
    keys = {"site_key": matching_key(site), "tag_key": matching_key(tag)}
    return session.execute(_loops_by_tag(), keys).one_or_none()


@cache
def _loops_by_id() -> Select[Loop, LoopRevision]:
    return present_revisions().add_columns(LoopRevision).where(Loop.id == bindparam("loop_id"))


@cache
def _loops_by_tag() -> Select[Loop, LoopRevision]:
    by_tag = (Loop.site_key == bindparam("site_key"), Loop.tag_key == bindparam("tag_key"))
    return present_revisions().add_columns(LoopRevision).where(*by_tag)


def _check_references(session: Session, actor: Actor, document: LoopRegistration) -> None:
    problems = []
    if not actor.sees(document.area):
        problems.append(FieldProblem("/area", "this area lies outside those of your account"))
    if document.inner_loop is not None and not _is_known(session, actor, document.inner_loop):
        problems.append(FieldProblem("/inner_loop", "there is no such loop"))
    if problems:
        raise FieldErrors(tuple(problems))


def _is_known(session: Session, actor: Actor, reference: LoopReference) -> bool:
    try:
        find_by_tag(session, actor, reference.site, reference.tag)
    except NotFound:
        return False
    return True


def _revision(loop_id: str, number: int, document: LoopRegistration) -> LoopRevision:
    content = canonical_bytes(plain(document))
    return LoopRevision(
        loop_id=loop_id,
        revision=number,
        area=document.area,
        description=document.description,
        safety_related=document.safety_related,
        content=content,
        content_digest=sha256(content).hexdigest(),
    )


def _models(session: Session, loop_id: str) -> tuple[LoopModel, ...]:
    return tuple(session.execute(_MODELS, {"loop_id": loop_id}).scalars())


def _view(loop: Loop, revision: LoopRevision, changed_by: str, entry: EntryReference) -> LoopView:
    return LoopView(
        id=loop.id,
        revision=revision.revision,
        loop=read_loop(revision),
        digest=revision.content_digest,
        changed_by=changed_by,
        entry=entry,
    )


def _model_view(row: LoopModel, in_force: bool, added_by: str, entry: EntryReference) -> ModelView:
    return ModelView(
        id=row.id,
        loop_id=row.loop_id,
        version=row.version,
        operating_point=row.operating_point,
        model=read_model(row),
        in_force=in_force,
        retired=row.retired,
        added_by=added_by,
        entry=entry,
    )
