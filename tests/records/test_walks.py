"""Walks through the life cycle that nobody thought of, each step held against a model of the rules.

The model knows what the rules ask for in words of its own; it does not read the table.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import datetime, timedelta

import pytest
from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, rule, run_state_machine_as_test

from service.records import loops
from service.records.errors import RecordsError
from service.records.roles import CONSOLE
from service.records.views import LoopView, SubmissionView
from service.verification.verifier import verify
from tests.databases import Databases
from tests.records.store import Store, gains, registration

PEOPLE = ("submitter", "colleague", "reviewer", "second", "auditor", "outsider")
REVIEWERS = {"colleague", "reviewer", "second"}
SUBMITTERS = {"submitter", "colleague"}
GAINS = (1.0, 1.5, 2.0)
RUNNING_AT_ONCE = {"emergency", "baseline"}


@dataclass
class Known:
    """What the model knows of one submission."""

    view: SubmissionView
    author: str
    kind: str
    gain: float
    temporary_until: datetime | None
    basis: tuple[int, int, str | None]
    """Revision, model version, and what ran before."""
    approvals: set[str] = field(default_factory=set)
    ended: bool = False
    """Rejected, withdrawn or revoked."""
    approved: bool = False
    ran: bool = False


class Walks(RuleBasedStateMachine):
    """One loop, several people, any order."""

    made: str
    databases: Databases

    def __init__(self) -> None:
        super().__init__()
        self.known: list[Known] = []
        self.running: Known | None = None
        self.revision = self.model = 1

    @initialize(safety_related=st.booleans())
    def begin(self, safety_related: bool) -> None:
        self.store = Store(self.databases.copy_of(self.made))
        self.loop: LoopView = self.store.register(safety_related=safety_related)
        self.store.add_model(self.loop)
        self.approvals_needed = 2 if safety_related else 1
        self.entries = len(self.store.events())

    def teardown(self) -> None:
        if hasattr(self, "store"):
            report = verify(self.store.url)
            assert report.holds, report.fault
            self.store.database.close()
            self.databases.drop(self.store.url)

    def _try(self, allowed: bool, step: Callable[[], object]) -> bool:
        """Take a step; it is done exactly where the model allows it, and makes exactly one entry."""
        before = self.store.counts()
        try:
            step()
        except RecordsError:
            assert not allowed
            assert self.store.counts() == before
            return False
        assert allowed
        self.entries += 1
        return True

    @rule(
        person=st.sampled_from(PEOPLE),
        kind=st.sampled_from(("planned", "emergency", "baseline", "return")),
        gain=st.sampled_from(GAINS),
        hours=st.sampled_from((None, 5)),
    )
    def submit(self, person: str, kind: str, gain: float, hours: int | None) -> None:
        until = None if hours is None else self.store.clock() + timedelta(hours=hours)
        found: list[SubmissionView] = []
        was_approved = any(known.gain == gain and known.approved for known in self.known)
        allowed = (
            person in SUBMITTERS
            and not (kind == "return" and not was_approved)
            and not (kind == "baseline" and until is not None)
            and not (kind == "baseline" and self.running is not None and self.running.gain == gain)
        )
        changes = {"kind": kind, "controller": gains(gain)}
        changes |= {} if until is None else {"temporary_until": until.isoformat()}
        if self._try(allowed, lambda: found.append(self.store.submit(person, **changes))):
            basis = (self.revision, self.model, self.running.view.id if self.running else None)
            known = Known(found[0], person, kind, gain, until, basis)
            self.known.append(known)
            if kind in RUNNING_AT_ONCE:
                self._runs(known)

    @rule(person=st.sampled_from(PEOPLE), which=st.integers(0, 5))
    def approve(self, person: str, which: int) -> None:
        if known := self._pick(which):
            allowed = (
                person in REVIEWERS
                and person != known.author
                and person not in known.approvals
                and known.kind != "baseline"
                and not known.ended
                and not known.approved
                and self._basis_stands(known)
            )
            if self._try(allowed, lambda: self.store.approve(known.view, person)):
                known.approvals.add(person)
                known.approved = len(known.approvals) >= self.approvals_needed

    @rule(person=st.sampled_from(PEOPLE), which=st.integers(0, 5))
    def reject(self, person: str, which: int) -> None:
        if known := self._pick(which):
            allowed = (
                person in REVIEWERS
                and person != known.author
                and known.kind != "baseline"
                and not known.ended
                and not known.approved
            )
            if self._try(allowed, lambda: self.store.decide(known.view, "reject", person)):
                known.ended = True

    @rule(person=st.sampled_from(PEOPLE), which=st.integers(0, 5))
    def withdraw(self, person: str, which: int) -> None:
        if known := self._pick(which):
            allowed = (
                person == known.author
                and known.kind in ("planned", "return")
                and not known.ended
                and not known.approved
            )
            if self._try(allowed, lambda: self.store.decide(known.view, "withdraw", person)):
                known.ended = True

    @rule(person=st.sampled_from(PEOPLE), which=st.integers(0, 5))
    def revoke(self, person: str, which: int) -> None:
        if known := self._pick(which):
            allowed = (
                person in REVIEWERS and known.approved and not known.ended and not self._was_superseded(known)
            )
            if self._try(allowed, lambda: self.store.decide(known.view, "revoke", person)):
                known.ended = True

    @rule(person=st.sampled_from(PEOPLE), which=st.integers(0, 5), left=st.sampled_from(GAINS))
    def install(self, person: str, which: int, left: float) -> None:
        if known := self._pick(which):
            is_emergency = known.kind == "emergency" and not known.approved and self.running is known
            stands = known.approved and not known.ended and not self._was_superseded(known)
            in_time = known.temporary_until is None or self.store.clock() <= known.temporary_until
            allowed = person in SUBMITTERS and not known.ended and (is_emergency or (stands and in_time))
            done = self._try(allowed, lambda: self.store.install(known.view, person, as_left=gains(left)))
            if done and left == known.gain:
                self._runs(known)

    @rule(hours=st.integers(1, 4))
    def wait(self, hours: int) -> None:
        self.store.clock.forward(hours=hours)

    @rule()
    def change_the_loop(self) -> None:
        changed = registration(
            description=f"revision {self.revision + 1}", safety_related=self.approvals_needed == 2
        )
        with self.store.database.writing() as session:
            loops.change(session, CONSOLE, self.loop.id, changed, self.revision, self.store.clock())
        self.revision += 1
        self.entries += 1

    @rule()
    def add_a_model(self) -> None:
        self.store.add_model(self.loop)
        self.model += 1
        self.entries += 1

    @invariant()
    def every_change_has_one_entry(self) -> None:
        if hasattr(self, "store"):
            assert len(self.store.events()) == self.entries

    @invariant()
    def nothing_is_approved_without_what_the_rules_ask(self) -> None:
        for known in self.known:
            view = self.store.read(known.view)
            if view.state in ("approved", "in_force") and known.kind != "baseline":
                signed = {
                    d.decision.signed_by.name for d in view.decisions if d.decision.decision == "approve"
                }
                assert len(signed) >= self.approvals_needed
                assert known.author not in signed
                assert view.verdict == "stable"
                assert known.approved
                assert not known.ended
            if known.temporary_until and self.store.clock() > known.temporary_until:
                assert view.state not in ("approved", "in_force")

    def _pick(self, which: int) -> Known | None:
        return self.known[which % len(self.known)] if self.known else None

    def _basis_stands(self, known: Known) -> bool:
        ran = known.kind in RUNNING_AT_ONCE
        running = known.basis[2] if ran else self.running.view.id if self.running else None
        return known.basis == (self.revision, self.model, running)

    def _runs(self, known: Known) -> None:
        known.ran, self.running = True, known

    def _was_superseded(self, known: Known) -> bool:
        return known.ran and self.running is not known


@pytest.mark.xdist_group("walks")
def test_no_walk_reaches_an_approval_without_what_the_rules_ask(made: str, databases: Databases) -> None:
    Walks.made, Walks.databases = made, databases
    run_state_machine_as_test(Walks, settings=settings(max_examples=20, stateful_step_count=25))
