"""The history of everything that was done, and the checkpoint by which a copy of it is held to account."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated

from annotated_types import Ge, Le
from flask import Blueprint, request

from service.api import answers, history_csv
from service.api.answers import Answer
from service.api.operations import Call, reads
from service.api.problems import INVALID_FIELDS
from service.api.queries import Instant, NoQuery, PageQuery, Text
from service.api.representations import Event, WholeEvent
from service.context import services
from service.issuing import checkpoints
from service.records import history_queries as queries
from service.records import proofs
from service.records.event_kinds import EventKind
from service.records.history_queries import HistoryFilter
from service.records.proofs import ConsistencyProof, InclusionProof
from service.records.views import Checkpoint

blueprint = Blueprint("history", __name__, url_prefix="/v1/history")

JSON_OR_CSV = ("application/json", "text/csv")


@dataclass(frozen=True, kw_only=True)
class HistoryQuery(PageQuery):
    """Which entries: `since` included, `until` excluded."""

    site: Text | None = None
    tag: Text | None = None
    area: Text | None = None
    since: Instant | None = None
    until: Instant | None = None
    actor: Text | None = None
    kind: EventKind | None = None

    @property
    def wanted(self) -> HistoryFilter:
        """The same as the records ask for it."""
        return HistoryFilter(
            site=self.site,
            tag=self.tag,
            area=self.area,
            since=self.since,
            until=self.until,
            actor=self.actor,
            kind=self.kind,
        )


Size = Annotated[int, Ge(1), Le(2**53)]


@dataclass(frozen=True, kw_only=True)
class InclusionQuery:
    """In the tree of how many entries; all where it is left out."""

    size: Size | None = None


@dataclass(frozen=True, kw_only=True)
class ConsistencyQuery:
    """The sizes of two checkpoints; `second` is the present one where it is left out."""

    first: Size
    second: Size | None = None


@blueprint.get("")
@reads(HistoryQuery, Event, a_list=True, media_types=JSON_OR_CSV)
def list_history(call: Call, query: HistoryQuery) -> Answer:
    """List the entries of the history, earliest first; as CSV where Accept asks for text/csv."""
    media_type = answers.preferred(request, JSON_OR_CSV)
    part = queries.history(call.session, call.actor, query.wanted, answers.after(query), query.limit)
    return history_csv.table(part) if media_type == "text/csv" else answers.page(part, Event.of)


@blueprint.get(f"/<int(max={2**53}):number>")
@reads(NoQuery, WholeEvent)
def show_entry(call: Call, _query: NoQuery, number: int) -> Answer:
    """Show one entry with the exact text that its digest is made from."""
    view = queries.entry(call.session, call.actor, number)
    return answers.document(WholeEvent(event=Event.of(view), canonical=view.canonical.decode()))


@blueprint.get(f"/<int(max={2**53}):number>/inclusion")
@reads(InclusionQuery, InclusionProof, refuses=(INVALID_FIELDS,))
def prove_inclusion(call: Call, query: InclusionQuery, number: int) -> Answer:
    """Prove that an entry is among those of a checkpoint (RFC 9162, section 2.1.3)."""
    return answers.document(proofs.inclusion(call.session, call.actor, number, query.size))


@blueprint.get("/consistency")
@reads(ConsistencyQuery, ConsistencyProof, refuses=(INVALID_FIELDS,))
def prove_consistency(call: Call, query: ConsistencyQuery) -> Answer:
    """Prove that an earlier checkpoint's entries begin a later one's (RFC 9162, section 2.1.4)."""
    return answers.document(proofs.consistency(call.session, query.first, query.second))


@blueprint.get("/checkpoint")
@reads(NoQuery, Checkpoint)
def show_checkpoint(call: Call, _query: NoQuery) -> Answer:
    """Give the state of the whole history in a few lines; keep a copy outside the database."""
    return answers.document(checkpoints.checkpoint(call.session, services().signing_key))
