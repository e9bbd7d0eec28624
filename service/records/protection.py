"""What of a loop an approval rests on, so that no one person changes it alone.

Ranges and units turn gains into per cent; fail position and inner loop say what a rising output does; limits
and the safety mark decide what may be approved, and by how many. Tightening a limit, or marking a loop as
safety related, makes approvals harder and needs nobody else.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields

from service.analysis.plant import Range
from service.documents.loops import LoopRegistration
from service.judgement.criteria import SERVICE_FLOORS, Criteria
from service.judgement.digits import as_entered
from service.judgement.wording import criterion_words
from service.records.content import SecondPersonReason


def protected(before: LoopRegistration, after: LoopRegistration) -> tuple[SecondPersonReason, ...]:
    """Name everything that changes from `before` to `after` and that an approval rests on."""
    return tuple(_protected(before, after))


def retirement(operating_point: str) -> SecondPersonReason:
    """Say what retiring an operating point takes away."""
    return SecondPersonReason(
        field="retire_operating_point",
        sentence=f"at operating point {operating_point} the gains are no longer recomputed",
    )


def _protected(before: LoopRegistration, after: LoopRegistration) -> Iterator[SecondPersonReason]:
    for name, words in (("pv", "the range of the PV"), ("output", "the range of the output")):
        was, will = getattr(before, name), getattr(after, name)
        if was != will:
            yield SecondPersonReason(
                field=name, sentence=f"{words} changes from {_range(was)} to {_range(will)}"
            )
    if before.fail_position != after.fail_position:
        told = f"from {before.fail_position or 'none'} to {after.fail_position or 'none'}"
        yield SecondPersonReason(field="fail_position", sentence=f"the fail position changes {told}")
    if before.inner_loop != after.inner_loop:
        sentence = "the output becomes the set point of another loop, or of none"
        yield SecondPersonReason(field="inner_loop", sentence=sentence)
    if before.safety_related and not after.safety_related:
        yield SecondPersonReason(
            field="safety_related", sentence="one approval will be enough in place of two"
        )
    for sentence in _loosened(before, after):
        yield SecondPersonReason(field="criteria", sentence=sentence)


def _loosened(before: LoopRegistration, after: LoopRegistration) -> Iterator[str]:
    own_before, own_after = before.own_criteria, after.own_criteria
    old, new = own_before or SERVICE_FLOORS, own_after or SERVICE_FLOORS
    for limit in fields(Criteria):
        was, will = getattr(old, limit.name), getattr(new, limit.name)
        if was is None:
            continue
        if will is None:
            yield f"a limit is taken away: {criterion_words(limit.name, was)}"
        elif (will < was) if limit.name.endswith("_min") else (will > was):
            words = criterion_words(limit.name, will)
            yield f"a limit is loosened: {words} in place of {as_entered(was)}"
    if own_before is None and own_after is not None:
        yield "the service's floor under the delay margin, which follows the dead time, no longer holds"


def _range(span: Range) -> str:
    return f"{as_entered(span.low)} to {as_entered(span.high)} {span.unit}".strip()
