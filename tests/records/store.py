"""A store with people, a loop and a model, and the few steps that most tests begin with."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from datetime import UTC, datetime, timedelta
from typing import Any

from argon2 import PasswordHasher
from sqlalchemy import Table, func, select

from service.documents.changes import ChangeDecisionRequest, LoopChangeRequest
from service.documents.decisions import DecisionRequest, Deviation
from service.documents.installations import InstallationRequest
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.reading import read
from service.documents.submissions import SubmissionRequest
from service.records import (
    accounts,
    change_queries,
    changes,
    decisions,
    history,
    history_queries,
    installations,
    loops,
    queries,
    sign_ins,
    submissions,
)
from service.records.accounts import NewAccount
from service.records.database import Database
from service.records.roles import CONSOLE, Actor, Role
from service.records.sign_ins import StartedSession
from service.records.tables import collection
from service.records.views import (
    ChangeView,
    DecisionView,
    InstallationView,
    LoopView,
    ModelView,
    SubmissionView,
)

CHEAP = PasswordHasher(time_cost=1, memory_cost=8, parallelism=1)
"""The real Argon2id, with a cost at which a test does not wait."""

HERE = "192.0.2.1"
"""An address that stands for none (RFC 5737)."""

START = datetime(2026, 3, 2, 6, 0, tzinfo=UTC)

PEOPLE: dict[str, tuple[tuple[Role, ...], tuple[str, ...]]] = {
    "submitter": (("submitter",), ()),
    "colleague": (("submitter", "reviewer"), ()),
    "reviewer": (("reviewer",), ()),
    "second": (("reviewer",), ()),
    "auditor": (("auditor",), ()),
    "administrator": (("administrator",), ()),
    "outsider": (("submitter", "reviewer", "auditor", "administrator"), ("Tank farm",)),
}
"""Account → roles and areas."""

GAINS: dict[str, Any] = {
    "form": "ideal",
    "action": "reverse",
    "proportional": {"value": 1.5, "unit": "gain", "displayed": "1.50"},
    "integral": {"value": 10.0, "unit": "seconds"},
    "derivative": None,
    "derivative_filter": None,
    "measurement_filter_s": 0.0,
    "setpoint_weight": {"proportional": 1.0, "derivative": 0.0},
    "scan": None,
}


def gains(proportional: float = 1.5, **changes: object) -> dict[str, Any]:
    """A complete controller; the plant below is stable with a gain below some 8."""
    term = GAINS["proportional"] | {"value": proportional, "displayed": f"{proportional:.2f}"}
    return GAINS | {"proportional": term} | changes


WIDER = {"low": 0.0, "high": 60.0, "unit": "m3/h"}
"""Another range of the PV than the one below."""


def registration(**changes: object) -> LoopRegistration:
    document: dict[str, Any] = {
        "site": "North",
        "tag": "FIC-101",
        "description": "feed to the dryer",
        "area": "Drying",
        "pv": {"low": 0.0, "high": 40.0, "unit": "m3/h"},
        "output": {"low": 0.0, "high": 100.0, "unit": "%"},
    }
    return read(LoopRegistration, document | changes)


def model_version(operating_point: str = "normal", gain: float = 1.0) -> ModelVersion:
    plant = {"kind": "first_order", "gain": gain, "time_constant_s": 10.0, "dead_time_s": 2.0}
    return read(
        ModelVersion, {"plant_model": plant, "operating_point": operating_point, "evidence": "step test"}
    )


def password_of(person: str) -> str:
    return f"correct battery of {person}"


@dataclass
class Clock:
    """A clock that stands until it is moved."""

    now: datetime = START

    def __call__(self) -> datetime:
        return self.now

    def forward(self, **by: float) -> datetime:
        self.now += timedelta(**by)
        return self.now


@dataclass
class Store:
    """An open store and its clock; each step is one transaction, as in the service."""

    url: str
    clock: Clock = field(default_factory=Clock)
    database: Database = field(init=False)

    def __post_init__(self) -> None:
        self.database = Database.open(self.url, clock=self.clock, password_hasher=CHEAP)

    def add_people(self) -> None:
        with self.database.writing() as session:
            for name, (roles, areas) in PEOPLE.items():
                new = NewAccount(
                    name=name, full_name=name.title(), roles=roles, areas=areas, password=password_of(name)
                )
                accounts.add(session, CONSOLE, new, self.clock())

    def actor(self, name: str) -> Actor:
        with self.database.reading() as session:
            return accounts.actor_of(session, accounts.find(session, CONSOLE, name).id)

    def register(self, person: str = "submitter", **changes: object) -> LoopView:
        with self.database.writing() as session:
            return loops.register(session, self.actor(person), registration(**changes), self.clock())

    def add_model(self, loop: LoopView, **changes: Any) -> ModelView:
        with self.database.writing() as session:
            return loops.add_model(
                session, self.actor("submitter"), loop.id, model_version(**changes), self.clock()
            )

    def prepare(self, person: str = "submitter", **changes: object) -> submissions.PreparedSubmission:
        document: dict[str, Any] = {
            "loop": {"site": "North", "tag": "FIC-101"},
            "kind": "planned",
            "reason": "the level swings",
            "safety_effect": "none",
            "controller": gains(),
        }
        request = read(SubmissionRequest, document | changes)
        with self.database.reading() as session:
            return submissions.prepare(session, self.actor(person), request, self.clock())

    def submit(self, person: str = "submitter", **changes: object) -> SubmissionView:
        prepared = self.prepare(person, **changes)
        with self.database.writing() as session:
            return submissions.submit(session, self.actor(person), prepared, self.clock())

    def decide(
        self, submission: SubmissionView, decision: str, person: str = "reviewer", **changes: Any
    ) -> DecisionView:
        request = DecisionRequest(
            decision=decision,  # type: ignore[arg-type]
            reason="reviewed",
            content_digest=submission.content_digest,
            password=password_of(person),
        )
        with self.database.writing() as session:
            return decisions.decide(
                session, self.actor(person), submission.id, replace(request, **changes), self.clock()
            )

    def approve(self, submission: SubmissionView, person: str = "reviewer", **changes: Any) -> DecisionView:
        given = tuple(Deviation(criterion=name, reason="accepted") for name in submission.deviations_needed)
        return self.decide(submission, "approve", person, **({"deviation": given} | changes))

    def prepare_installation(
        self, submission: SubmissionView, person: str = "submitter", **changes: Any
    ) -> installations.PreparedInstallation:
        document = {
            "as_found": gains(1.0),
            "as_left": gains(),
            "installed_at": self.clock().isoformat(),
        }
        request = read(InstallationRequest, document | changes)
        with self.database.reading() as session:
            return installations.prepare(session, self.actor(person), submission.id, request, self.clock())

    def install(
        self, submission: SubmissionView, person: str = "submitter", **changes: Any
    ) -> InstallationView:
        prepared = self.prepare_installation(submission, person, **changes)
        with self.database.writing() as session:
            return installations.install(session, self.actor(person), prepared, self.clock())

    def read(self, submission: SubmissionView, person: str = "reviewer") -> SubmissionView:
        with self.database.reading() as session:
            return queries.submission(session, self.actor(person), submission.id, self.clock())

    def propose(
        self,
        loop: LoopView,
        person: str = "submitter",
        revision: int = 1,
        retire: str | None = None,
        **changed: Any,
    ) -> ChangeView:
        request = LoopChangeRequest(
            revision=revision,
            reason="the transmitter was ranged anew",
            loop=None if retire else registration(**(changed or {"pv": WIDER})),
            retire_operating_point=retire,
        )
        with self.database.writing() as session:
            return changes.propose(session, self.actor(person), loop.id, request, self.clock())

    def prepare_decision(
        self, change: ChangeView, decision: str = "confirm", person: str = "reviewer", **changed: Any
    ) -> changes.PreparedDecision:
        document = {
            "decision": decision,
            "reason": "read against the data sheet",
            "content_digest": change.content_digest,
            "password": password_of(person),
        }
        request = read(ChangeDecisionRequest, document | changed)
        with self.database.reading() as session:
            return changes.prepare(session, self.actor(person), change.id, request, self.clock())

    def decide_change(
        self, change: ChangeView, decision: str = "confirm", person: str = "reviewer", **changed: Any
    ) -> ChangeView:
        prepared = self.prepare_decision(change, decision, person, **changed)
        with self.database.writing() as session:
            return changes.decide(session, self.actor(person), change.id, prepared, self.clock())

    def read_change(self, change: ChangeView, person: str = "reviewer") -> ChangeView:
        with self.database.reading() as session:
            return change_queries.find(session, self.actor(person), change.id)

    def sign_in(
        self, name: str = "reviewer", password: str | None = None, source: str = HERE
    ) -> StartedSession:
        return sign_ins.sign_in(self.database, name, password or password_of(name), source)

    def events(self) -> list[str]:
        """The kinds of all entries, in order."""
        with self.database.reading() as session:
            found = queries.history(session, self.actor("auditor"), queries.HistoryFilter(), limit=10_000)
        return [event.kind for event in found.items]

    def last_entry(self) -> tuple[str, str, dict[str, Any]]:
        """Kind, actor and content of the last entry."""
        with self.database.reading() as session:
            entry = history_queries.entry(session, CONSOLE, history.head(session).size)
        return entry.kind, entry.actor, entry.content

    def counts(self) -> dict[str, int]:
        """How many rows each table has."""
        with self.database.reading() as session:
            return {table.name: _count(session, table) for table in collection.metadata().sorted_tables}


def _count(session: Any, table: Table) -> int:
    return int(session.execute(select(func.count()).select_from(table)).scalar_one())
