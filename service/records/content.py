"""What is signed: the content of a submission, whole and by value, from which its digest is made.

Stored as canonical bytes and read back as these dataclasses. A field that is added later has a default, so
that earlier content still reads.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from service.documents.decisions import Deviation
from service.documents.discriminated import ControllerField
from service.documents.installations import InstallationRequest
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.reading import read_kept
from service.documents.recomputations import RecomputationAnswer
from service.documents.submissions import Tool
from service.documents.texts import Moment
from service.judgement.claims import Claims
from service.judgement.criteria import Criteria, CriterionFinding
from service.records.lifecycle import Kind


@dataclass(frozen=True, kw_only=True, slots=True)
class Person:
    """A person as named at the time; a later change of name does not reach what is kept."""

    name: str
    full_name: str


@dataclass(frozen=True, kw_only=True, slots=True)
class SignedGains:
    """One set of gains as entered. `condition` None and no operating points: the only set, good at each."""

    condition: str | None
    operating_points: tuple[str, ...]
    controller: ControllerField


@dataclass(frozen=True, kw_only=True, slots=True)
class SignedModel:
    """A model version that was in force."""

    id: str
    version: int
    model: ModelVersion


@dataclass(frozen=True, kw_only=True, slots=True)
class SignedRecomputation:
    """One set of gains recomputed with one model: results and the limits held against them, by value."""

    model_id: str
    operating_point: str
    gain_set: int
    """Index into the submission's gain sets."""
    criteria: Criteria
    answer: RecomputationAnswer
    """Without curves, which are kept beside it."""
    curves_digest: str | None
    hard_floors: tuple[CriterionFinding, ...]
    """The limits that no deviation makes good."""


@dataclass(frozen=True, kw_only=True, slots=True)
class WorstCriterion:
    """One limit over all operating points: what came of it at the worst one."""

    finding: CriterionFinding
    operating_point: str
    gain_set: int


@dataclass(frozen=True, kw_only=True, slots=True)
class SignedGainsInForce:
    """The gains that ran in the controller, as far as is recorded, when these were submitted."""

    submission_id: str
    content_digest: str
    gain_sets: tuple[SignedGains, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class RecomputedAgain:
    """That a submission was recomputed after a change of its loop, which change, and when."""

    change_id: str
    recomputed_at: Moment


@dataclass(frozen=True, kw_only=True, slots=True)
class SignedContent:
    """Everything that a signature on a submission covers."""

    submission_id: str
    loop_id: str
    loop_revision: int
    loop: LoopRegistration
    kind: Kind
    reason: str
    safety_effect: str
    gain_sets: tuple[SignedGains, ...]
    submitted_by: Person
    submitted_at: Moment
    prepared_by: tuple[Person, ...]
    tool: Tool | None
    claims: Claims | None
    temporary_until: Moment | None
    install_by: Moment | None
    models: tuple[SignedModel, ...]
    criteria_source: Literal["loop", "service_floors"]
    criteria: tuple[WorstCriterion, ...]
    recomputations: tuple[SignedRecomputation, ...]
    gains_in_force: SignedGainsInForce | None
    recomputed_again: RecomputedAgain | None = None
    """None: everything is as it was when the gains were submitted."""


@dataclass(frozen=True, kw_only=True, slots=True)
class DecisionContent:
    """A signature: who, what it means, when, on which content, with which reason and deviations."""

    decision_id: str
    submission_id: str
    decision: Literal["approve", "reject", "withdraw", "revoke"]
    meaning: str
    reason: str
    deviation: tuple[Deviation, ...]
    content_digest: str
    signed_by: Person
    signed_at: Moment


@dataclass(frozen=True, kw_only=True, slots=True)
class Difference:
    """A setting in which two controllers differ. Values are None where one of them has no such term."""

    setting: str
    unit: str
    recorded: float | str | None
    found: float | str | None
    hinders: bool
    """True: the gains are other gains. False: a recorded setting differs, which is only said."""
    condition: str | None = None
    """Of the set of scheduled gains; None where there is one set only."""


@dataclass(frozen=True, kw_only=True, slots=True)
class SetLeft:
    """One approved set that was looked at: its index, and whether as left it is as approved."""

    gain_set: int
    as_approved: bool


@dataclass(frozen=True, kw_only=True, slots=True)
class InstallationContent:
    """Gains typed into a controller, as found and as left, with what differs from those approved."""

    installation_id: str
    submission_id: str
    gain_set: int
    """Index of the first approved set that as left was compared with."""
    recorded_by: Person
    recorded_at: Moment
    installation: InstallationRequest
    as_approved: bool
    """As left are the approved gains."""
    before_approval: bool
    """Installed before it was approved. An emergency change is, and says so by its kind."""
    differences: tuple[Difference, ...]
    """The approved gains → as left."""
    as_found_differences: tuple[Difference, ...] | None
    """The gains that were in force as far as was recorded → as found; None where none were."""
    gain_sets: tuple[SetLeft, ...] = ()
    """Every set that was looked at; empty: `gain_set` alone, as it was recorded before there were several."""

    def sets_left(self) -> tuple[SetLeft, ...]:
        """Return every set that was looked at."""
        return self.gain_sets or (SetLeft(gain_set=self.gain_set, as_approved=self.as_approved),)


@dataclass(frozen=True, kw_only=True, slots=True)
class SecondPersonReason:
    """One thing that needs a second person: the field it stands in, and a sentence."""

    field: str
    sentence: str


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopChangeContent:
    """A change of what approvals rest on, as a second person confirms it.

    `after` is the loop as it is to be; where it is None, `retires` is the model version that is taken out of
    force with its operating point.
    """

    change_id: str
    loop_id: str
    loop_revision: int
    """The revision that the change was made from."""
    before: LoopRegistration
    after: LoopRegistration | None
    retires: SignedModel | None
    needs_second_person: tuple[SecondPersonReason, ...]
    """Empty: one person could have made it, and asked for another all the same."""
    reason: str
    proposed_by: Person
    proposed_at: Moment


@dataclass(frozen=True, kw_only=True, slots=True)
class ChangeDecisionContent:
    """A signature on a change: who, what it means, when, on which content, with which reason."""

    change_id: str
    decision: Literal["confirm", "reject", "withdraw"]
    meaning: str
    reason: str
    content_digest: str
    signed_by: Person
    signed_at: Moment


def read_content(kept: bytes) -> SignedContent:
    """Read the kept content of a submission."""
    return read_kept(SignedContent, kept)


def read_decision(kept: bytes) -> DecisionContent:
    """Read the kept content of a decision."""
    return read_kept(DecisionContent, kept)


def read_change(kept: bytes) -> LoopChangeContent:
    """Read the kept content of a change of a loop."""
    return read_kept(LoopChangeContent, kept)


def read_change_decision(kept: bytes) -> ChangeDecisionContent:
    """Read the kept content of a decision on a change of a loop."""
    return read_kept(ChangeDecisionContent, kept)


def read_installation(kept: bytes) -> InstallationContent:
    """Read the kept content of an installation."""
    return read_kept(InstallationContent, kept)
