"""How the records look in JSON: what a reader of the API sees, flat where the records keep parts apart.

Each is a frozen dataclass, so that the API description is made from the very shape that is sent.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from datetime import datetime
from typing import Any, Literal

from service.analysis.controller import Controller
from service.analysis.results import Verdict
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.submissions import Kind, Tool
from service.judgement.claims import Claims
from service.records.change_lifecycle import ChangeAction, ChangeState
from service.records.content import (
    ChangeDecisionContent,
    DecisionContent,
    InstallationContent,
    Person,
    RecomputationOfSubmission,
    RecomputedAgain,
    SecondPersonReason,
    SignedContent,
    SignedGains,
    SignedGainsInForce,
    SignedModel,
    WorstCriterion,
)
from service.records.lifecycle import Action, State
from service.records.views import (
    ChangeDecisionView,
    ChangeView,
    Checkpoint,
    Comparison,
    DecisionView,
    Effect,
    EntryReference,
    EventView,
    InstallationView,
    LoopView,
    ModelView,
    RecheckView,
    SubmissionView,
)


@dataclass(frozen=True, kw_only=True)
class LoopIdentity:
    """Which loop, at which revision."""

    id: str
    revision: int


@dataclass(frozen=True, kw_only=True)
class Loop(LoopRegistration, LoopIdentity):
    """A loop at one revision."""

    digest: str
    """SHA-256 of this revision's canonical content."""
    changed_by: str
    entry: EntryReference

    @classmethod
    def of(cls, view: LoopView) -> Loop:
        """Represent a loop."""
        return cls(
            **_fields_of(view.loop),
            id=view.id,
            revision=view.revision,
            digest=view.digest,
            changed_by=view.changed_by,
            entry=view.entry,
        )


@dataclass(frozen=True, kw_only=True)
class ModelIdentity:
    """Which model version of which loop."""

    id: str
    loop_id: str
    version: int
    in_force: bool
    """The latest of its operating point, and that is not retired."""
    retired: bool
    """From this version on its operating point has no model in force."""


@dataclass(frozen=True, kw_only=True)
class Model(ModelVersion, ModelIdentity):
    """A model version."""

    added_by: str
    entry: EntryReference

    @classmethod
    def of(cls, view: ModelView) -> Model:
        """Represent a model version."""
        return cls(
            **_fields_of(view.model),
            id=view.id,
            loop_id=view.loop_id,
            version=view.version,
            in_force=view.in_force,
            retired=view.retired,
            added_by=view.added_by,
            entry=view.entry,
        )


@dataclass(frozen=True, kw_only=True)
class LoopChangeDecision(ChangeDecisionContent):
    """The signature that a change was decided with, and the entry of the history that it stands in."""

    entry: EntryReference
    checkpoint: Checkpoint | None
    """Of the history up to that entry, made with the decision; null where none was kept with it."""

    @classmethod
    def of(cls, view: ChangeDecisionView) -> LoopChangeDecision:
        """Represent a decision on a change."""
        return cls(**_fields_of(view.decision), entry=view.entry, checkpoint=view.checkpoint)


@dataclass(frozen=True, kw_only=True)
class LoopChange:
    """A change of what approvals of a loop rest on, in its state at the time of reading."""

    id: str
    state: ChangeState
    content_digest: str
    loop_id: str
    loop_revision: int
    """The revision that the change was made from."""
    before: LoopRegistration
    after: LoopRegistration | None
    """The loop as it is to be; null where an operating point is to be retired."""
    retires: SignedModel | None
    """The model version that is taken out of force with its operating point."""
    needs_second_person: tuple[SecondPersonReason, ...]
    """Empty: one person could have made the change, and asked for another all the same."""
    reason: str
    proposed_by: Person
    proposed_at: datetime
    decision: LoopChangeDecision | None
    open_decisions: tuple[ChangeAction, ...]
    """What the account that reads may decide."""
    entry: EntryReference

    @classmethod
    def of(cls, view: ChangeView) -> LoopChange:
        """Represent a change."""
        content = {name: value for name, value in _fields_of(view.content).items() if name != "change_id"}
        return cls(
            **content,
            id=view.id,
            state=view.state,
            content_digest=view.content_digest,
            decision=None if view.decision is None else LoopChangeDecision.of(view.decision),
            open_decisions=view.open_decisions,
            entry=view.entry,
        )


@dataclass(frozen=True, kw_only=True)
class Decision(DecisionContent):
    """One signature, with the entry of the history that it stands in."""

    entry: EntryReference
    checkpoint: Checkpoint | None
    """Of the history up to that entry, made with the decision; null where none was kept with it."""

    @classmethod
    def of(cls, view: DecisionView) -> Decision:
        """Represent a decision."""
        return cls(**_fields_of(view.decision), entry=view.entry, checkpoint=view.checkpoint)


@dataclass(frozen=True, kw_only=True)
class Installation(InstallationContent):
    """Gains typed into the controller, with the entry of the history that says so."""

    entry: EntryReference

    @classmethod
    def of(cls, view: InstallationView) -> Installation:
        """Represent an installation."""
        return cls(**_fields_of(view.installation), entry=view.entry)


@dataclass(frozen=True, kw_only=True)
class Submission:
    """A submission whole, in its state at the time of reading."""

    id: str
    state: State
    content_digest: str
    verdict: Verdict | None
    """The worst over all operating points; null where there is no model."""
    kind: Kind
    loop_id: str
    loop_revision: int
    loop: LoopRegistration
    reason: str
    safety_effect: str
    controller: Controller | None
    gain_sets: tuple[SignedGains, ...] | None
    submitted_by: Person
    submitted_at: datetime
    prepared_by: tuple[Person, ...]
    tool: Tool | None
    claims: Claims | None
    temporary_until: datetime | None
    install_by: datetime | None
    criteria_source: Literal["loop", "service_floors"]
    criteria: tuple[WorstCriterion, ...]
    recomputations: tuple[RecomputationOfSubmission, ...]
    approvals_needed: int
    deviations_needed: tuple[str, ...]
    hindrances: tuple[str, ...]
    changed_basis: tuple[str, ...]
    decisions: tuple[Decision, ...]
    installations: tuple[Installation, ...]
    recomputed_again: RecomputedAgain | None
    """The change of the loop after which this was recomputed; null: as it was submitted."""
    gains_in_force: SignedGainsInForce | None
    """Those that ran when this was submitted; part of what is signed."""
    comparison: tuple[Comparison, ...]
    """One a gain set: those gains in force → these."""
    effects: tuple[Effect, ...]
    """What the change does, in sentences, on every model that the gains before were recomputed with too."""
    review_due_at: datetime | None
    overdue: bool
    recheck_due: RecheckView | None
    """The change of what these gains were approved on, while they run or may be installed; else null."""
    open_actions: tuple[Action, ...]
    """What the account that reads may do next."""
    entry: EntryReference

    @classmethod
    def of(cls, view: SubmissionView) -> Submission:
        """Represent a submission."""
        return cls(
            id=view.id,
            **_of_view(view),
            **_of_content(view.content),
            comparison=view.comparisons,
            effects=view.effects,
            decisions=tuple(Decision.of(decision) for decision in view.decisions),
            installations=tuple(Installation.of(installation) for installation in view.installations),
        )


@dataclass(frozen=True, kw_only=True)
class Event:
    """One entry of the history."""

    number: int
    time: datetime
    kind: str
    actor: str
    loop_id: str | None
    site: str | None
    tag: str | None
    area: str | None
    content: Any
    digest: str
    previous: str

    @classmethod
    def of(cls, view: EventView) -> Event:
        """Represent an entry."""
        return cls(**{name: getattr(view, name) for name in cls.__dataclass_fields__})


@dataclass(frozen=True, kw_only=True)
class WholeEvent:
    """One entry with the text whose UTF-8 bytes `digest` is the leaf hash of (RFC 9162, section 2.1.1)."""

    event: Event
    canonical: str


def _of_view(view: SubmissionView) -> dict[str, Any]:
    names = (
        "state",
        "content_digest",
        "verdict",
        "approvals_needed",
        "deviations_needed",
        "hindrances",
        "changed_basis",
        "review_due_at",
        "overdue",
        "recheck_due",
        "open_actions",
        "entry",
    )
    return {name: getattr(view, name) for name in names}


def _of_content(content: SignedContent) -> dict[str, Any]:
    changed = ("submission_id", "gain_sets", "models", "recomputations")
    kept = {name: value for name, value in _fields_of(content).items() if name not in changed}
    # as it was sent: one controller, or sets with their conditions
    alone = content.gain_sets[0].controller if content.gain_sets[0].condition is None else None
    return kept | {
        "controller": alone,
        "gain_sets": content.gain_sets if alone is None else None,
        "recomputations": tuple(
            RecomputationOfSubmission.of(signed, content.models) for signed in content.recomputations
        ),
    }


def _fields_of(record: Any) -> dict[str, Any]:
    return {field.name: getattr(record, field.name) for field in fields(record)}
