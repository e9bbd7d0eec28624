"""What stands on a sheet, from the frozen views of the records: texts ready to be laid out, and curves.

Everything that a signature covers and that fits on paper is here in words; the record has it in JSON.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime

from service.analysis.plant import Range
from service.documents.loops import LoopRegistration
from service.figures.responses import Response, stored_responses
from service.judgement.criteria import quantity_name
from service.judgement.digits import as_entered, three_digits
from service.judgement.quantities import QUANTITIES
from service.judgement.wording import WORST_CASE_LABELS, criterion_sentence, quantity_label
from service.records.content import (
    Difference,
    Person,
    SignedContent,
    SignedGains,
    SignedModel,
    SignedRecomputation,
)
from service.records.lifecycle import REVIEW_OWED
from service.records.views import (
    Comparison,
    CurvesView,
    DecisionView,
    EntryReference,
    InstallationView,
    SubmissionView,
)
from service.sheets import controllers, plants
from service.sheets.assessments import Assessment, assessment
from service.sheets.cautions import Cautions, cautions
from service.sheets.controllers import Told
from service.sheets.states import STATES, StateWords

RENDERER_VERSION = "1"
"""Of all that decides how a sheet looks: raised with each change by which the bytes of a sheet change."""

KINDS = {
    "planned": "planned change",
    "emergency": "emergency change, installed first and reviewed after",
    "baseline": "baseline: gains found running, recorded without approval",
    "return": "return to gains approved earlier",
}
DECISIONS = {
    "approve": "Approved",
    "reject": "Rejected",
    "withdraw": "Withdrawn",
    "revoke": "Approval revoked",
}
NOT_ANALYSED = "recorded, not analysed"


@dataclass(frozen=True, kw_only=True, slots=True)
class GainLine:
    """One line of the gains table: the new value beside the one before, which may not be on record."""

    name: str
    value: str
    unit: str
    before: str
    before_unit: str
    change: str = ""
    """In per cent, where both stand in the same unit; else that they do not."""


@dataclass(frozen=True, kw_only=True, slots=True)
class GainTable:
    """One set of gains as entered, and what has to stand on the display beside it."""

    condition: str
    before_heading: str
    gains: tuple[GainLine, ...]
    settings: tuple[GainLine, ...]
    """`before` only where it differs."""
    recorded: tuple[Told, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class Signature:
    """One signature as it was given, its reason and deviations, and its own entry of the history."""

    heading: str
    meaning: str
    reason: str
    deviations: tuple[Told, ...]
    entry: str


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
    """What the QR code says: the digests of the record."""


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
    good, summary = _summary(signed)
    drawn = _Drawn(curves, curves_in_force, signed)
    return SheetContent(
        demonstration=demonstration,
        record=view.id,
        site=signed.loop.site,
        tag=signed.loop.tag,
        description=signed.loop.description,
        state=STATES[view.state],
        conditions=tuple(_conditions(view)),
        summary=summary,
        summary_good=good,
        tables=tuple(_tables(view)),
        cautions=cautions(
            [each.answer.recomputation.facts for each in signed.recomputations], signed.loop.inner_loop
        ),
        loop=tuple(_loop(signed.loop, signed.loop_revision)),
        request=tuple(_request(signed)),
        reasons=tuple(_reasons(signed)),
        criteria_source=_CRITERIA_SOURCES[signed.criteria_source],
        worst=tuple(_worst(signed)),
        assessments=tuple(
            assessment(_title(signed, each), each.answer, drawn.responses(each))
            for each in signed.recomputations
        ),
        hard_limits=tuple(
            criterion_sentence(finding) for each in signed.recomputations for finding in each.hard_floors
        ),
        models=tuple(_model(model) for model in signed.models),
        signatures=tuple(_signature(decision) for decision in view.decisions),
        no_signature="" if view.decisions else "Nobody has signed this record.",
        installations=tuple(_installation(each) for each in view.installations),
        version=tuple(_version(view)),
        digests=tuple(_digests(view)),
        code=_code(view),
    )


_CRITERIA_SOURCES = {
    "loop": "Limits: those of the loop, as they were when this was submitted.",
    "service_floors": "Limits: the service's own floors, since the loop has none.",
}


class _Drawn:
    """The stored curves by model and set of gains."""

    def __init__(
        self, curves: Sequence[CurvesView], in_force: Sequence[CurvesView], signed: SignedContent
    ) -> None:
        self._own = {(each.model_id, each.gain_set): each.curves for each in curves}
        self._earlier = {(each.model_id, each.gain_set): each.curves for each in in_force}
        self._signed = signed

    def responses(self, recomputed: SignedRecomputation) -> tuple[Response, ...]:
        curves = self._own.get((recomputed.model_id, recomputed.gain_set))
        if curves is None:
            return ()
        _, set_before = _before(self._signed, recomputed.gain_set)
        earlier = self._earlier.get((recomputed.model_id, set_before))
        return stored_responses(
            recomputed.answer.recomputation,
            curves,
            earlier=earlier,
            name="these gains",
            earlier_name="gains before",
        )


def _summary(signed: SignedContent) -> tuple[bool, str]:
    """Whether all is well, and the one line that says so or not. Never more than was computed."""
    if not signed.recomputations:
        return False, "Nothing was recomputed: there is no model of this process on record."
    verdicts = {each.answer.recomputation.verdict for each in signed.recomputations}
    verdict = next(worst for worst in ("unstable", "undecided", "stable") if worst in verdicts)
    told = {
        "unstable": "The recomputed loop is UNSTABLE.",
        "undecided": "It could NOT BE SHOWN that the loop is stable.",
        "stable": "The recomputed loop is stable.",
    }[verdict]
    outcomes = [worst.finding.outcome for worst in signed.criteria]
    counts = ((outcomes.count("not_met"), "NOT MET"), (outcomes.count("not_assessed"), "NOT ASSESSED"))
    failed = [f"{count} {words}" for count, words in counts if count]
    if failed:
        told += f" Limits: {' and '.join(failed)}, of {len(outcomes)}."
    else:
        told += f" Limits: all {len(outcomes)} met." if outcomes else " It was held against NO LIMIT."
    return verdict == "stable" and bool(outcomes) and not failed, told


def _conditions(view: SubmissionView) -> Iterator[str]:
    signed = view.content
    if signed.install_by and not view.installations:
        yield f"To be installed by {utc(signed.install_by)}."
    if signed.temporary_until:
        yield f"TEMPORARY: valid until {utc(signed.temporary_until)}."
    if view.approvals_needed > 1 and view.state in REVIEW_OWED:
        given = sum(decision.decision.decision == "approve" for decision in view.decisions)
        yield f"{view.approvals_needed} approvals by different people are needed, {given} given."
    if view.review_due_at:
        yield f"The review is due at {utc(view.review_due_at)}."
    if view.overdue:
        yield "OVERDUE."


def _tables(view: SubmissionView) -> Iterator[GainTable]:
    signed = view.content
    for index, gain_set in enumerate(signed.gain_sets):
        before, _ = _before(signed, index)
        new, old = gain_set.controller, before.controller if before else None
        changes = _changes(view.comparisons[index]) if index < len(view.comparisons) else {}
        yield GainTable(
            condition=_condition(gain_set),
            before_heading="BEFORE: the way back" if before else "BEFORE: not on record",
            gains=tuple(
                replace(line, change=_change(line, changes))
                for line in _lines(controllers.gains(new), controllers.gains(old) if old else ())
            ),
            settings=tuple(
                _only_if_changed(line)
                for line in _lines(
                    controllers.surroundings(new), controllers.surroundings(old) if old else ()
                )
            ),
            recorded=controllers.recorded(new),
        )


def _changes(comparison: Comparison) -> dict[str, float]:
    """Changes in per cent of the terms as they were entered, by the name of the term."""
    if comparison.common_form is not None:
        return {}
    return {each.setting: each.percent for each in comparison.settings if each.percent is not None}


def _change(line: GainLine, changes: Mapping[str, float]) -> str:
    if controllers.NONE in (line.value, line.before) or not line.before:
        return ""
    if line.unit != line.before_unit:
        return "NOT IN THE SAME UNIT"
    percent = changes.get(_SETTINGS.get(_key(line), ""))
    if percent is None:
        return ""
    return f"change {'+' if percent > 0 else ''}{three_digits(percent)} %".replace("-", "−")


_SETTINGS = {
    "Proportional": "proportional",
    "Integral": "integral",
    "Derivative": "derivative",
    "Derivative filter": "derivative_filter",
    "Gain k": "gain",
}
"""The names by which a comparison speaks of the lines of the table."""


def _before(signed: SignedContent, index: int) -> tuple[SignedGains | None, int]:
    """The set of gains that this one takes the place of, and its index.

    It is the one for the same condition, or the one that held under every condition.
    """
    if signed.gains_in_force:
        condition = signed.gain_sets[index].condition
        for place, earlier in enumerate(signed.gains_in_force.gain_sets):
            if earlier.condition in (condition, None):
                return earlier, place
    return None, -1


def _condition(gain_set: SignedGains) -> str:
    if gain_set.condition is None:
        return ""
    return f"When: {gain_set.condition}. Judged at: {', '.join(gain_set.operating_points)}."


def _lines(new: Sequence[Told], old: Sequence[Told]) -> tuple[GainLine, ...]:
    """New and old side by side, matched by name; an old line that has no new one comes last."""
    earlier = {_key(told): told for told in old}
    lines = []
    for told in new:
        before = earlier.pop(_key(told), None)
        lines.append(_line(told.name, told, before if before else _absent(old)))
    gone = (told for told in earlier.values() if told.value != controllers.NONE)
    lines += [_line(told.name, Told(name=told.name, value=controllers.NONE), told) for told in gone]
    return tuple(lines)


def _line(name: str, told: Told, before: Told) -> GainLine:
    return GainLine(name=name, value=told.value, unit=told.unit, before=before.value, before_unit=before.unit)


def _absent(old: Sequence[Told]) -> Told:
    return Told(name="", value=controllers.NONE if old else "")


def _key(told: Told | GainLine) -> str:
    return told.name.split(" (")[0]


def _only_if_changed(line: GainLine) -> GainLine:
    before = line.before if line.before != line.value else ""
    return GainLine(name=line.name, value=line.value, unit=line.unit, before=before, before_unit="")


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
    yield Told(name=role, value=f"{_person(signed.submitted_by)}, {utc(signed.submitted_at)}")
    if signed.prepared_by and not alone:
        yield Told(name="Prepared by", value=", ".join(_person(person) for person in signed.prepared_by))
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
    set_of = f", gains for: {condition}" if condition is not None else ""
    return f"Operating point: {recomputed.operating_point}{set_of}"


def _model(signed: SignedModel) -> Model:
    return Model(
        title=f"Model version {signed.version}, operating point: {signed.model.operating_point}",
        parameters=plants.told(signed.model.plant_model),
        evidence=signed.model.evidence,
    )


def _signature(view: DecisionView) -> Signature:
    decision = view.decision
    return Signature(
        heading=f"{DECISIONS[decision.decision]} by {_person(decision.signed_by)}, {utc(decision.signed_at)}",
        meaning=decision.meaning,
        reason=decision.reason,
        deviations=tuple(
            Told(name=_criterion(each.criterion), value=each.reason) for each in decision.deviation
        ),
        entry=f"History entry {view.entry.number}, digest {view.entry.digest}",
    )


def _criterion(name: str) -> str:
    """The limit, or the finding, that a deviation answers, in words and by its name."""
    quantity = quantity_name(name)
    if quantity in QUANTITIES or quantity in WORST_CASE_LABELS:
        return f"{quantity_label(quantity)} ({name})"
    return f"finding ({name})"


def _installation(view: InstallationView) -> Told:
    done = view.installation
    request = done.installation
    people = (
        ("typed by", request.typed_by),
        ("read back by", request.read_back_by),
        ("operator", request.operator),
    )
    told = [f"recorded by {_person(done.recorded_by)}", *(f"{role} {name}" for role, name in people if name)]
    told.append("as left is as approved" if done.as_approved else "AS LEFT IS NOT AS APPROVED")
    told += [f"left: {_difference(each)}" for each in done.differences]
    told += [f"found: {_difference(each)}" for each in done.as_found_differences or ()]
    told.append(_SAVED[request.saved_to_engineering_database])
    told.append(f"history entry {view.entry.number}, digest {view.entry.digest}")
    return Told(name=f"Installed {utc(request.installed_at)}", value="; ".join(told))


def _difference(difference: Difference) -> str:
    recorded, found = (_entered(value) for value in (difference.recorded, difference.found))
    setting = difference.setting.replace("_", " ")
    return f"{setting} {found} {difference.unit}, on record {recorded}"


def _entered(value: float | str | None) -> str:
    if value is None:
        return controllers.NONE
    return value if isinstance(value, str) else as_entered(value)


_SAVED = {
    True: "saved to the engineering database",
    False: "NOT saved to the engineering database",
    None: "whether it was saved to the engineering database is not recorded",
}


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
    return f"record {view.id}\ncontent {view.content_digest}\nentry {latest.number} {latest.digest}"


def _latest(view: SubmissionView) -> EntryReference:
    """The last entry of the history that says something of this record."""
    signed = [decision.entry for decision in view.decisions]
    entries = [view.entry, *signed, *(installation.entry for installation in view.installations)]
    return max(entries, key=lambda entry: entry.number)


def utc(moment: datetime) -> str:
    """A time on paper, to the second; the records' times are in UTC."""
    return moment.strftime("%Y-%m-%d %H:%M:%S UTC")


def _person(person: Person) -> str:
    return f"{person.full_name} ({person.name})"


def _range(span: Range) -> str:
    return f"{as_entered(span.low)} to {as_entered(span.high)} {span.unit}".strip()
