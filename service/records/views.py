"""What the records show: frozen dataclasses for API, pages and sheets. Nothing here can be changed."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Generic, Literal, TypeVar

from service.analysis.results import Curves, Verdict
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.strict_json import Plain
from service.documents.submissions import Kind
from service.records.change_lifecycle import ChangeAction, ChangeState
from service.records.content import (
    ChangeDecisionContent,
    DecisionContent,
    InstallationContent,
    LoopChangeContent,
    Person,
    SignedContent,
    SignedGains,
)
from service.records.lifecycle import Action, State
from service.records.roles import Role

Item = TypeVar("Item")


@dataclass(frozen=True, kw_only=True, slots=True)
class Page(Generic[Item]):
    """Part of a list; `after` is where the next part begins, None at the end."""

    items: tuple[Item, ...]
    after: str | None


@dataclass(frozen=True, kw_only=True, slots=True)
class AccountView:
    """An account, without anything secret."""

    id: str
    name: str
    full_name: str
    roles: tuple[Role, ...]
    areas: tuple[str, ...]
    created_at: datetime
    closed_at: datetime | None
    last_used_at: datetime | None
    signing_suspended: bool
    """The password was reset by one administrator and not yet confirmed by another."""


@dataclass(frozen=True, kw_only=True, slots=True)
class TokenView:
    """A token's entry; the token itself is shown once, when it is issued."""

    id: str
    account_name: str
    note: str
    issued_at: datetime
    revoked_at: datetime | None
    last_used_at: datetime | None


@dataclass(frozen=True, kw_only=True, slots=True)
class EntryReference:
    """The entry of the history that a record stands in."""

    number: int
    digest: str
    time: datetime


@dataclass(frozen=True, kw_only=True, slots=True)
class LoopView:
    """A loop at one revision."""

    id: str
    revision: int
    loop: LoopRegistration
    digest: str
    """SHA-256 of this revision's canonical content."""
    changed_by: str
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class ModelView:
    """A model version. `in_force`: the latest of its operating point, and that is not retired."""

    id: str
    loop_id: str
    version: int
    """Counted over all operating points of the loop."""
    operating_point: str
    model: ModelVersion
    in_force: bool
    retired: bool
    """From this version on the operating point has no model in force."""
    added_by: str
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class Checkpoint:
    """The state of the whole history, as it was at one entry."""

    origin: str
    """Digest of the first entry: it names the store, and no two stores share it."""
    size: int
    """Entries that are covered."""
    digest: str
    """Root of the Merkle tree over them."""
    head: str
    """Digest of the last of them."""
    time: datetime | None
    """Time of the last of them."""
    public_key: str | None
    """Raw Ed25519 key in base64, to be compared with one that is held elsewhere; null where none is set."""
    signature: str | None
    """Ed25519 in base64, over the other parts; null where no signing key is set."""


@dataclass(frozen=True, kw_only=True, slots=True)
class ChangeDecisionView:
    """The signature that a change of a loop was decided with."""

    decision: ChangeDecisionContent
    entry: EntryReference
    checkpoint: Checkpoint | None
    """Made with the decision, `entry` the last that it covers; None where none was kept."""


@dataclass(frozen=True, kw_only=True, slots=True)
class ChangeView:
    """A change of what approvals rest on, in its state at the time it was read."""

    id: str
    state: ChangeState
    content: LoopChangeContent
    content_digest: str
    area: str
    """The loop's present area."""
    decision: ChangeDecisionView | None
    open_decisions: tuple[ChangeAction, ...]
    """What the actor who read it may decide."""
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class DecisionView:
    """One signature."""

    decision: DecisionContent
    entry: EntryReference
    checkpoint: Checkpoint | None = None
    """Made with the decision, `entry` the last that it covers; None where none was kept."""


@dataclass(frozen=True, kw_only=True, slots=True)
class InstallationView:
    """One record of gains typed into the controller."""

    installation: InstallationContent
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class RecheckView:
    """That gains are due for a recheck: the change that altered what they were approved on, in sentences."""

    change_id: str
    sentences: tuple[str, ...]
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class GainsInForce:
    """The gains that run in the controller as far as is recorded, whatever has become of their approval.

    `state` may be `lapsed`, `revoked` or `rejected`: then they run and should not.
    """

    submission_id: str
    content_digest: str
    kind: Kind
    state: State
    since: datetime
    gain_sets: tuple[SignedGains, ...]
    recheck_due: RecheckView | None
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class CurvesView:
    """The stored curves of one recomputation, to be drawn as they were signed."""

    model_id: str
    operating_point: str
    gain_set: int
    curves: Curves


@dataclass(frozen=True, kw_only=True, slots=True)
class SettingChange:
    """One setting, before and after. `percent` None where it has no meaning (a text, or nothing before)."""

    setting: str
    unit: str
    before: float | str | None
    after: float | str | None
    percent: float | None
    changed: bool


@dataclass(frozen=True, kw_only=True, slots=True)
class Comparison:
    """Two controllers term by term.

    `common_form` None: both are entered in one form and in the same units, and stand as they were entered;
    else all terms were brought to that form first.
    """

    common_form: Literal["parallel"] | None
    same_gains: bool
    settings: tuple[SettingChange, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class Effect:
    """What a change of gains does to the loop on one model, in sentences, from the stored results."""

    model_id: str
    gain_set: int
    sentences: tuple[str, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class Compared:
    """Which gains stand on one side of a comparison."""

    submission_id: str
    content_digest: str


@dataclass(frozen=True, kw_only=True, slots=True)
class GainSetComparison:
    """One gain set of `after` with the one that it is held against."""

    condition: str | None
    comparison: Comparison


@dataclass(frozen=True, kw_only=True, slots=True)
class SubmissionComparison:
    """The gains of one submission held against those of another, set by set.

    `before` None, and no sets: no gains of the loop are in force as far as is recorded.
    """

    before: Compared | None
    after: Compared
    gain_sets: tuple[GainSetComparison, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class SubmissionSummary:
    """One line of a list of submissions."""

    id: str
    loop_id: str
    site: str
    tag: str
    area: str
    description: str
    kind: Kind
    state: State
    reason: str
    verdict: Verdict | None
    """The worst over all operating points; null where there is no model."""
    submitted_by: Person
    submitted_at: datetime
    review_due_at: datetime | None
    overdue: bool
    recheck_due: bool
    """What the gains were approved on has been changed since."""
    content_digest: str
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class SubmissionView:
    """A submission whole: what is signed, its state at the time it was read, decisions and installations."""

    id: str
    state: State
    content: SignedContent
    content_digest: str
    area: str
    """The loop's present area."""
    verdict: Verdict | None
    """The worst over all operating points; None where there is no model."""
    approvals_needed: int
    deviations_needed: tuple[str, ...]
    """Names of criteria and findings that an approval has to answer."""
    hindrances: tuple[str, ...]
    """Sentences: why no deviation makes this approvable; empty where an approval is possible."""
    changed_basis: tuple[str, ...]
    """In words, what has changed since the recomputation; while there is anything, nobody can approve."""
    decisions: tuple[DecisionView, ...]
    installations: tuple[InstallationView, ...]
    comparisons: tuple[Comparison, ...]
    """One a gain set: the gains in force when this was submitted → these. Empty where none were known."""
    effects: tuple[Effect, ...]
    """One for each recomputation whose model the gains before were recomputed with too."""
    review_due_at: datetime | None
    overdue: bool
    """An emergency change whose review is owed past its time, or a temporary one past its own."""
    recheck_due: RecheckView | None
    """The change of what these gains were approved on; None where there is none, or they do not run."""
    open_actions: tuple[Action, ...]
    """What the actor who read it may do next: `approve`, `reject`, `withdraw`, `revoke`, `install`."""
    entry: EntryReference


@dataclass(frozen=True, kw_only=True, slots=True)
class EventView:
    """One entry of the history."""

    number: int
    time: datetime
    kind: str
    actor: str
    loop_id: str | None
    site: str | None
    tag: str | None
    area: str | None
    content: Plain
    digest: str
    previous: str
    canonical: bytes
    """The exact bytes that `digest` is the RFC 9162 leaf hash of."""


@dataclass(frozen=True, kw_only=True, slots=True)
class HeadView:
    """Where the history stands: entries so far, the last one's digest and time, and the Merkle root of them
    all.
    """

    size: int
    digest: str
    root: str
    time: datetime | None
