"""What is signed: the content of a submission, whole and by value, from which its digest is made.

Stored as canonical bytes and read back as these dataclasses. A field that is added later has a default, so
that earlier content still reads.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from service.analysis.controller import Controller
from service.analysis.results import Verdict
from service.documents.decisions import Deviation
from service.documents.discriminated import ControllerField
from service.documents.installations import InstallationRequest
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.reading import read_kept
from service.documents.recomputations import RecomputationAnswer
from service.documents.submissions import Kind, Tool
from service.documents.texts import Moment
from service.judgement.claims import Claims
from service.judgement.criteria import Criteria, CriterionFinding

VerdictAsLeft = Verdict | Literal["not_assessed"]


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
class ModelReference:
    """The model version that a recomputation was made with."""

    id: str
    version: int
    operating_point: str


@dataclass(frozen=True, kw_only=True, slots=True)
class RecomputationOfSubmission:
    """What was recomputed with one model, and the limits it was held against."""

    model: ModelReference
    gain_set: int
    """Index into the submission's gain sets; 0 where it has one controller."""
    criteria: Criteria
    hard_floors: tuple[CriterionFinding, ...]
    """Limits that no deviation makes good."""
    result: RecomputationAnswer
    """As `POST /v1/recomputations` answers, without curves."""

    @classmethod
    def of(cls, signed: SignedRecomputation, models: tuple[SignedModel, ...]) -> RecomputationOfSubmission:
        """Show one recomputation; `models` are those that it was made from."""
        version = next(model.version for model in models if model.id == signed.model_id)
        return cls(
            model=ModelReference(id=signed.model_id, version=version, operating_point=signed.operating_point),
            gain_set=signed.gain_set,
            criteria=signed.criteria,
            hard_floors=signed.hard_floors,
            result=signed.answer,
        )


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
    """Of the set of scheduled gains; null where there is one set only."""


@dataclass(frozen=True, kw_only=True, slots=True)
class SetLeft:
    """One approved set that was looked at: its index, and whether as left it is as approved."""

    gain_set: int
    as_approved: bool


@dataclass(frozen=True, kw_only=True, slots=True)
class SetLeftOtherwise:
    """Gains that run in the controller in the place of an approved set."""

    gain_set: int
    """Index into the submission's gain sets; 0 where it has one controller."""
    condition: str | None
    operating_points: tuple[str, ...]
    controller: ControllerField


@dataclass(frozen=True, kw_only=True, slots=True)
class NotRecomputed:
    """Gains as left that form no loop with a model, and why."""

    model: ModelReference
    gain_set: int
    reason: str


@dataclass(frozen=True, kw_only=True, slots=True)
class RecomputedAsLeft:
    """The loop with gains that were left otherwise than approved. It was computed; nobody has approved it."""

    verdict: VerdictAsLeft
    """The worst over all sets and operating points. `undecided` too where gains form no loop with a model;
    `not_assessed` where there is no model to judge a set by."""
    loop_revision: int
    gain_sets: tuple[SetLeftOtherwise, ...]
    """Every set that is otherwise by the last word on it, one that was looked at earlier too."""
    criteria_source: Literal["loop", "service_floors"]
    criteria: tuple[WorstCriterion, ...]
    recomputations: tuple[RecomputationOfSubmission, ...]
    not_recomputed: tuple[NotRecomputed, ...]


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
    as_left_recomputed: RecomputedAsLeft | None = None
    """None: as left are the approved gains, or it was recorded before such gains were recomputed."""

    def sets_left(self) -> tuple[SetLeft, ...]:
        """Return every set that was looked at."""
        return self.gain_sets or (SetLeft(gain_set=self.gain_set, as_approved=self.as_approved),)

    def sets_as_left(self) -> Iterator[tuple[SetLeft, Controller]]:
        """Yield every set that was looked at with its controller as left."""
        yield from zip(self.sets_left(), self.installation.lefts(), strict=True)


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
