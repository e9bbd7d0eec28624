"""What stands on a sheet, from the frozen views of the records: texts ready to be laid out, and curves.

Everything that a signature covers and that fits on paper is here in words; the record has it in JSON.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from service.analysis.plant import Range
from service.analysis.results import Curves
from service.documents.loops import LoopRegistration
from service.figures.responses import Response, stored_responses
from service.judgement.digits import as_entered
from service.judgement.wording import criterion_sentence
from service.records.approvability import worst_verdict
from service.records.content import DecisionContent, SignedContent, SignedModel, SignedRecomputation
from service.records.lifecycle import REVIEW_OWED
from service.records.views import CurvesView, EntryReference, SubmissionView
from service.sheets import checkpoints, plants
from service.sheets.assessments import Assessment, assessment
from service.sheets.cautions import Cautions, cautions
from service.sheets.controllers import Told
from service.sheets.gain_tables import GainTable, gain_tables, set_before
from service.sheets.signatures import Signature, installation, named, signature, utc
from service.sheets.states import STATES, StateWords
from service.sheets.summaries import recomputation_title, summary

RENDERER_VERSION = "2"
"""Of all that decides how a sheet looks: raised with each change by which the bytes of a sheet change."""

KINDS = {
    "planned": "planned change",
    "emergency": "emergency change, installed first and reviewed after",
    "baseline": "baseline: gains found running, recorded without approval",
    "return": "return to gains approved earlier",
}


@dataclass(frozen=True, kw_only=True, slots=True)
class Model:
    """A model that the gains were recomputed with."""

    title: str
    parameters: tuple[Told, ...]
    evidence: str


@dataclass(frozen=True, kw_only=True, slots=True)
class SheetContent:
    """All that stands on a sheet."""

    demonstration: bool
    record: str
    site: str
    tag: str
    description: str
    state: StateWords
    conditions: tuple[str, ...]
    """Times that limit the state, approvals still owed, in sentences."""
    summary: str
    """Verdict and limits in one line, for the first page."""
    summary_good: bool
    tables: tuple[GainTable, ...]
    cautions: tuple[Cautions, ...]
    loop: tuple[Told, ...]
    request: tuple[Told, ...]
    reasons: tuple[Told, ...]
    criteria_source: str
    worst: tuple[str, ...]
    assessments: tuple[Assessment, ...]
    hard_limits: tuple[str, ...]
    models: tuple[Model, ...]
    signatures: tuple[Signature, ...]
    no_signature: str
    installations: tuple[Told, ...]
    version: tuple[Told, ...]
    digests: tuple[Told, ...]
    code: str
    """What the QR code says: the digests of the record, and in a last line the checkpoint as a file."""
    checkpoint: tuple[str, ...]
    """The checkpoint of the latest signature and what it covers, or why there is none; in sentences."""


def content_of(
    view: SubmissionView,
    curves: Sequence[CurvesView] = (),
    *,
    curves_in_force: Sequence[CurvesView] = (),
    demonstration: bool = False,
) -> SheetContent:
    """Tell a record on paper.

    `curves` are its stored curves, `curves_in_force` those of the gains in force when it was submitted: they
    are drawn beside where they were computed with the same model.
    """
    signed = view.content
    answers = [each.answer for each in signed.recomputations]
    told = summary(worst_verdict(signed.recomputations), answers, signed.criteria)
    drawn = {(each.model_id, each.gain_set): each.curves for each in curves}
    beside = {(each.model_id, each.gain_set): each.curves for each in curves_in_force}
    effects = {(each.model_id, each.gain_set): each.sentences for each in view.effects}
    return SheetContent(
        demonstration=demonstration,
        record=view.id,
        site=signed.loop.site,
        tag=signed.loop.tag,
        description=signed.loop.description,
        state=STATES[view.state],
        conditions=tuple(_conditions(view)),
        summary=told.sentence,
        summary_good=told.good,
        tables=tuple(gain_tables(view)),
        cautions=cautions(
            [each.answer.recomputation.facts for each in signed.recomputations], signed.loop.inner_loop
        ),
        loop=tuple(_loop(signed.loop, signed.loop_revision)),
        request=tuple(_request(signed)),
        reasons=tuple(_reasons(signed)),
        criteria_source=_CRITERIA_SOURCES[signed.criteria_source],
        worst=tuple(_worst(signed)),
        assessments=tuple(
            assessment(
                _title(signed, each),
                each.answer,
                _responses(signed, each, drawn, beside),
                effects.get((each.model_id, each.gain_set), ()),
            )
            for each in signed.recomputations
        ),
        hard_limits=tuple(_hard_limits(signed.recomputations)),
        models=tuple(_model(model) for model in signed.models),
        signatures=tuple(signature(decision, view.content_digest) for decision in view.decisions),
        no_signature="" if view.decisions else "Nobody has signed this record.",
        installations=tuple(installation(each) for each in view.installations),
        version=tuple(_version(view)),
        digests=tuple(_digests(view)),
        code=_code(view),
        checkpoint=tuple(checkpoints.about(view.decisions)),
    )


def _hard_limits(recomputations: Sequence[SignedRecomputation]) -> Iterator[str]:
    """What is below the hard floors; a loop that is not stable has no margins, and its verdict says it."""
    for each in recomputations:
        if each.answer.recomputation.verdict == "stable":
            yield from (criterion_sentence(finding) for finding in each.hard_floors)


_CurvesOf = Mapping[tuple[str, int], Curves]
"""Stored curves by the model and the index of the set of gains."""

_CRITERIA_SOURCES = {
    "loop": "Limits: those of the loop, as they were when this was submitted.",
    "service_floors": "Limits: the service's own floors, since the loop has none.",
}


def _responses(
    signed: SignedContent, recomputed: SignedRecomputation, drawn: _CurvesOf, beside: _CurvesOf
) -> tuple[Response, ...]:
    """The stored responses of one recomputation, those of the gains before it beside them."""
    curves = drawn.get((recomputed.model_id, recomputed.gain_set))
    if curves is None:
        return ()
    _, index_before = set_before(signed, recomputed.gain_set)
    return stored_responses(
        recomputed.answer.recomputation,
        curves,
        earlier=beside.get((recomputed.model_id, index_before)),
        name="these gains",
        earlier_name="gains before",
    )


def _conditions(view: SubmissionView) -> Iterator[str]:
    signed = view.content
    if signed.install_by and not view.installations:
        yield f"To be installed by {utc(signed.install_by)}."
    if signed.temporary_until:
        yield f"TEMPORARY: valid until {utc(signed.temporary_until)}."
    if view.approvals_needed > 1 and view.state in REVIEW_OWED:
        given = sum(_approves(decision.decision, view) for decision in view.decisions)
        yield f"{view.approvals_needed} approvals by different people are needed, {given} given."
    if view.review_due_at:
        yield f"The review is due at {utc(view.review_due_at)}."
    if view.overdue:
        yield "OVERDUE."
    if view.recheck_due:
        told = "; ".join(view.recheck_due.sentences)
        yield f"DUE FOR A RECHECK since change {view.recheck_due.change_id} of the loop: {told}."
    if view.changed_basis and view.state in REVIEW_OWED:
        yield f"Changed since this was recomputed: {'; '.join(view.changed_basis)}."


def _approves(decision: DecisionContent, view: SubmissionView) -> bool:
    # an approval of what has been recomputed since is no approval of these results
    return (decision.decision, decision.content_digest) == ("approve", view.content_digest)


def _loop(loop: LoopRegistration, revision: int) -> Iterator[Told]:
    yield Told(name="Area", value=loop.area)
    yield Told(name="PV range", value=_range(loop.pv))
    yield Told(name="Output range", value=_range(loop.output))
    if loop.service_class:
        yield Told(name="Service", value=loop.service_class)
    yield Told(
        name="Safety related", value="YES: two approvals by two people" if loop.safety_related else "no"
    )
    if loop.fail_position:
        yield Told(name="Fail position", value=loop.fail_position)
    if loop.inner_loop:
        yield Told(name="Cascade, secondary loop", value=f"{loop.inner_loop.tag} ({loop.inner_loop.site})")
    yield Told(name="Loop revision", value=str(revision))


def _request(signed: SignedContent) -> Iterator[Told]:
    yield Told(name="Kind", value=KINDS[signed.kind])
    alone = signed.prepared_by == (signed.submitted_by,)
    role = "Prepared and submitted by" if alone else "Submitted by"
    yield Told(name=role, value=f"{named(signed.submitted_by)}, {utc(signed.submitted_at)}")
    if signed.prepared_by and not alone:
        yield Told(name="Prepared by", value=", ".join(named(person) for person in signed.prepared_by))
    if signed.recomputed_again:
        again = signed.recomputed_again
        told = f"{utc(again.recomputed_at)}, after change {again.change_id} of the loop"
        yield Told(name="Recomputed again", value=told)
    if signed.tool:
        yield Told(name="Tool", value=f"{signed.tool.name}, version {signed.tool.version}")


def _reasons(signed: SignedContent) -> Iterator[Told]:
    yield Told(name="Reason", value=signed.reason)
    yield Told(name="Effect on safety", value=signed.safety_effect)


def _worst(signed: SignedContent) -> Iterator[str]:
    """What came of each limit at the worst operating point; with one recomputation its own table says it."""
    if len(signed.recomputations) > 1:
        for worst in signed.criteria:
            yield f"{criterion_sentence(worst.finding)} Worst at: {worst.operating_point}."


def _title(signed: SignedContent, recomputed: SignedRecomputation) -> str:
    condition = signed.gain_sets[recomputed.gain_set].condition
    return recomputation_title(recomputed.operating_point, condition)


def _model(signed: SignedModel) -> Model:
    return Model(
        title=f"Model version {signed.version}, operating point: {signed.model.operating_point}",
        parameters=plants.told(signed.model.plant_model),
        evidence=signed.model.evidence,
    )


def _version(view: SubmissionView) -> Iterator[Told]:
    latest = _latest(view)
    yield Told(name="Record", value=view.id)
    yield Told(name="Last history entry of this record", value=f"{latest.number} ({utc(latest.time)})")
    if view.content.gains_in_force:
        yield Told(name="Takes the place of record", value=view.content.gains_in_force.submission_id)
    else:
        yield Told(name="Takes the place of record", value="none: no earlier gains on record")
    yield Told(name="Layout", value=RENDERER_VERSION)


def _digests(view: SubmissionView) -> Iterator[Told]:
    yield Told(name="Digest of the content", value=view.content_digest)
    yield Told(name=f"Digest of history entry {view.entry.number}", value=view.entry.digest)


def _code(view: SubmissionView) -> str:
    latest = _latest(view)
    digests = f"record {view.id}\ncontent {view.content_digest}\nentry {latest.number} {latest.digest}"
    return "\n".join(filter(None, (digests, checkpoints.code(view.decisions))))


def _latest(view: SubmissionView) -> EntryReference:
    """The last entry of the history that says something of this record."""
    signed = [decision.entry for decision in view.decisions]
    entries = [view.entry, *signed, *(installation.entry for installation in view.installations)]
    return max(entries, key=lambda entry: entry.number)


def _range(span: Range) -> str:
    return f"{as_entered(span.low)} to {as_entered(span.high)} {span.unit}".strip()
