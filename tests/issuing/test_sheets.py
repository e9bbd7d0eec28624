"""What is made at a decision and kept with it: the sheet, and the checkpoint that stands on it."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from io import BytesIO

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from pypdf import PdfReader

from service.documents.decisions import DecisionRequest, Deviation
from service.issuing import sheets, signing_keys
from service.issuing.base64_text import public_text
from service.records import kept_sheets, migrating
from service.records.views import DecisionView, SubmissionView
from service.verification.checkpoints import Checkpoint
from service.verification.verifier import verify
from tests.codes import codes_in, text_in
from tests.databases import Databases
from tests.records.store import START, Store, gains, password_of

KEY = Ed25519PrivateKey.generate()

on_sqlite = pytest.mark.parametrize("databases", ["sqlite"], indirect=True)
"""What paper says does not depend on where the record is kept; that its bytes come back does, above."""


@dataclass
class Office:
    """A store in which people decide, each decision with its sheet."""

    store: Store
    key: Ed25519PrivateKey | None = None

    def sign(
        self, submission: SubmissionView, decision: str = "approve", person: str = "reviewer"
    ) -> DecisionView:
        self.store.clock.forward(hours=1)
        needed = submission.deviations_needed if decision == "approve" else ()
        request = DecisionRequest(
            decision=decision,  # type: ignore[arg-type]
            reason="reviewed",
            content_digest=submission.content_digest,
            deviation=tuple(Deviation(criterion=name, reason="accepted") for name in needed),
            password=password_of(person),
        )
        actor = self.store.actor(person)
        with self.store.database.writing() as session:
            return sheets.sign(session, actor, submission.id, request, self.store.clock(), self.key)

    def kept(self, submission: SubmissionView) -> bytes:
        with self.store.database.reading() as session:
            return kept_sheets.latest(session, self.store.actor("auditor"), submission.id)

    def printed(self, submission: SubmissionView) -> bytes:
        with self.store.database.reading() as session:
            return sheets.sheet(session, self.store.actor("auditor"), submission.id, self.store.clock())


@pytest.fixture
def office(databases: Databases) -> Iterator[Office]:
    url = databases.new()
    migrating.migrate(url, now=START, demonstration=True)
    store = Store(url)
    store.add_people()
    store.add_model(store.register())
    signing_keys.take_up(store.database, KEY)
    yield Office(store, KEY)
    store.database.close()
    databases.drop(url)


def test_the_checkpoint_covers_the_decision_and_stands_on_the_sheet(office: Office) -> None:
    submission = office.store.submit()
    made = office.sign(submission)
    kept = made.checkpoint
    assert kept is not None
    assert (kept.size, kept.head) == (made.entry.number, made.entry.digest)
    assert kept.public_key == public_text(KEY)
    paper = text_in(office.kept(submission))
    for told in (kept.digest, kept.origin, str(kept.signature), f"entries1to{kept.size},", kept.head):
        assert told in paper


def test_the_code_is_a_file_for_the_verification(office: Office) -> None:
    submission = office.store.submit()
    office.sign(submission)
    for pdf in (office.kept(submission), office.printed(submission)):
        told = checkpoint_in(pdf)
        held = Checkpoint.read(told.encode())
        assert held.is_signed
        report = verify(office.store.url, checkpoint=held, held_key=public_text(KEY))
        assert report.holds
        assert verify(office.store.url, checkpoint=_with_another_root(told)).fault is not None


def checkpoint_in(pdf: bytes) -> str:
    """The last line of the code."""
    (code,) = codes_in(pdf)
    return code.splitlines()[-1]


def _with_another_root(told: str) -> Checkpoint:
    return Checkpoint.read(json.dumps(json.loads(told) | {"digest": "0" * 64}).encode())


def test_a_sheet_is_the_same_until_something_of_its_record_happens(office: Office) -> None:
    """However far the history has come meanwhile: what was kept is printed again, byte for byte."""
    submission = office.store.submit()
    office.sign(submission)
    office.store.register(tag="LIC-7")
    office.key = None
    office.sign(office.store.submit(controller=gains(1.2)), "reject")
    assert office.printed(submission) == office.kept(submission)
    office.store.install(submission)
    later = office.printed(submission)
    assert later != office.kept(submission)
    assert checkpoint_in(later) == checkpoint_in(office.kept(submission))


@on_sqlite
def test_each_signature_has_a_checkpoint_and_the_sheet_shows_the_latest(office: Office) -> None:
    submission = office.store.submit()
    first = office.sign(submission)
    second = office.sign(office.store.read(submission), "revoke", "second")
    decisions = office.store.read(submission).decisions
    assert [each.checkpoint for each in decisions] == [first.checkpoint, second.checkpoint]
    assert second.checkpoint is not None
    for told in ("ApprovedbyReviewer", "ApprovalrevokedbySecond"):
        assert told in text_in(office.kept(submission))
    assert second.checkpoint.digest in text_in(office.kept(submission))
    assert json.loads(checkpoint_in(office.kept(submission)))["size"] == second.checkpoint.size


@on_sqlite
def test_the_responses_of_the_gains_in_force_stand_beside_those_that_are_asked_for(office: Office) -> None:
    first = office.store.submit()
    office.sign(first)
    office.store.install(first)
    later = office.store.submit(controller=gains(1.2))
    with office.store.database.reading() as session:
        before, after = (
            sheets.content(session, office.store.actor("auditor"), office.store.read(each)).assessments[0]
            for each in (first, later)
        )
    assert [each.earlier is None for each in before.responses] == [True, True]
    assert [each.earlier is None for each in after.responses] == [False, False]


@on_sqlite
def test_without_a_key_a_sheet_says_that_its_checkpoint_is_unsigned(office: Office) -> None:
    office.key = None
    submission = office.store.submit()
    made = office.sign(submission)
    assert made.checkpoint is not None
    assert (made.checkpoint.public_key, made.checkpoint.signature) == (None, None)
    assert "UNSIGNED:theservicehadnosigningkeyinforce" in text_in(office.kept(submission))
    held = Checkpoint.read(checkpoint_in(office.kept(submission)).encode())
    assert verify(office.store.url, checkpoint=held).holds


@on_sqlite
def test_a_sheet_of_gains_that_nobody_has_signed_says_that_there_is_none(office: Office) -> None:
    pdf = office.printed(office.store.submit())
    assert "Nocheckpointofthehistory:oneismadewitheachsignature" in text_in(pdf)
    assert checkpoint_in(pdf).startswith("entry ")


@on_sqlite
def test_a_decision_from_before_checkpoints_were_kept_says_so(office: Office) -> None:
    submission = office.store.submit()
    office.store.approve(submission)
    pdf = office.printed(submission)
    number = office.store.read(submission).decisions[0].entry.number
    assert f"Nocheckpointofthehistorywaskeptwiththesignatureofentry{number}" in text_in(pdf)
    assert checkpoint_in(pdf).startswith("entry ")


@on_sqlite
def test_a_usual_signed_sheet_has_two_pages(office: Office) -> None:
    submission = office.store.submit()
    office.sign(submission)
    assert len(PdfReader(BytesIO(office.printed(submission))).pages) == 2
