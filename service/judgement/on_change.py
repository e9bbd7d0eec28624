"""What a change of gains does to the loop: the recomputed loop before and after, one plain sentence each.

Nothing is computed here. Both loops were recomputed on the same model, with the settings of their own
controllers, so that a change of form, filter or scan shows in the same sentences as one of the gains.
"""

from __future__ import annotations

from collections.abc import Iterator

from service.analysis.results import Analysis, Quantity, Recomputation
from service.judgement.digits import apart, three_digits, time
from service.judgement.quantities import judged

SAME_SHARE = 0.01
"""A change of less than this share is not worth a sentence."""

SAME_PERCENT = 0.5
"""The same for an overshoot, in points."""

OFFSET_MIN = 1e-6
"""Share of a step from which on an offset is told; below it is rounding."""


def what_changes(before: Recomputation, after: Recomputation) -> tuple[str, ...]:
    """The sentences, the heaviest first; empty where nothing that is told changes."""
    if after.verdict != "stable" or before.verdict != "stable":
        return tuple(_verdicts(before, after))
    was, will = judged(before), judged(after)
    if was is None or will is None:
        return ()
    subjects = (_nearness, _speed, _overshoot, _offset, _load, _noise)
    told = [sentence for subject in subjects for sentence in subject(was, will)]
    if before.judged_on != after.judged_on:
        told.append(
            "One of the two is judged as it is scanned and the other as if it acted all the time: the "
            "difference between them is in these figures."
        )
    return tuple(told)


def _verdicts(before: Recomputation, after: Recomputation) -> Iterator[str]:
    was = {"stable": "was stable", "unstable": "was unstable", "undecided": "was not shown to be stable"}
    will = {
        "stable": "would be stable",
        "unstable": "would be unstable",
        "undecided": "is not shown to be stable with these gains",
    }
    if before.verdict != after.verdict:
        yield f"The loop {was[before.verdict]} and {will[after.verdict]}."
    else:
        yield f"The loop {was[before.verdict]} before and stays so."


def _nearness(was: Analysis, will: Analysis) -> Iterator[str]:
    if was.margins is None or will.margins is None:
        return
    pair = _both(was.margins.max_sensitivity, will.margins.max_sensitivity)
    if pair is None or _same(*pair):
        return
    side = "nearer to instability" if pair[1] > pair[0] else "further from instability"
    before, after = apart(*pair)
    margins = [
        f"{name} {_told(one, unit)} → {_told(other, unit)}"
        for name, unit, one, other in (
            ("gain margin", "", was.margins.gain_margin, will.margins.gain_margin),
            ("phase margin", "°", was.margins.phase_margin_deg, will.margins.phase_margin_deg),
        )
        if one is not None and other is not None
    ]
    rest = f" ({', '.join(margins)})" if margins else ""
    yield f"The loop comes {side}: maximum sensitivity {before} → {after}{rest}."


def _speed(was: Analysis, will: Analysis) -> Iterator[str]:
    if was.setpoint_step is None or will.setpoint_step is None:
        return
    for name, pair in (
        ("rises", _both(was.setpoint_step.rise_time_s, will.setpoint_step.rise_time_s)),
        ("settles", _both(was.setpoint_step.settling_time_s, will.setpoint_step.settling_time_s)),
    ):
        if pair is not None and pair[0] > 0 and pair[1] > 0 and not _same(*pair):
            times = f"{time(pair[0])} → {time(pair[1])}"
            yield f"After a step of the set point PV {name} {_faster(*pair)}: {times}."


def _faster(before: float, after: float) -> str:
    if after < before:
        return f"{three_digits(before / after)} times as fast"
    return f"more slowly, in {three_digits(after / before)} times the time"


def _overshoot(was: Analysis, will: Analysis) -> Iterator[str]:
    if was.setpoint_step is None or will.setpoint_step is None:
        return
    pair = _both(was.setpoint_step.overshoot_percent, will.setpoint_step.overshoot_percent)
    if pair is None or abs(pair[1] - pair[0]) < SAME_PERCENT:
        return
    before, after = apart(*pair)
    damping = "less damped" if pair[1] > pair[0] else "better damped"
    yield f"The response to the set point is {damping}: overshoot {before} % → {after} %."


def _offset(was: Analysis, will: Analysis) -> Iterator[str]:
    if was.setpoint_step is not None and will.setpoint_step is not None:
        pair = _both(was.setpoint_step.final_value, will.setpoint_step.final_value)
        yield from _lasting("after a step of the set point", pair and (pair[0] - 1.0, pair[1] - 1.0))
    if was.load_step is not None and will.load_step is not None:
        pair = _both(was.load_step.final_value, will.load_step.final_value)
        yield from _lasting("under a lasting load", pair)


def _lasting(when: str, pair: tuple[float, float] | None) -> Iterator[str]:
    if pair is None:
        return
    was, will = (abs(offset) >= OFFSET_MIN for offset in pair)
    if was and not will:
        yield f"The lasting offset {when} goes away."
    elif will and not was:
        yield f"A lasting offset {when} comes in: {three_digits(100 * abs(pair[1]))} % of the step."


def _load(was: Analysis, will: Analysis) -> Iterator[str]:
    if was.load_step is None or will.load_step is None:
        return
    pair = _both(was.load_step.peak_deviation, will.load_step.peak_deviation)
    if pair is not None and pair[0] != 0 and not _same(*pair):
        before, after = apart(abs(pair[0]), abs(pair[1]))
        further = "further" if abs(pair[1]) > abs(pair[0]) else "less far"
        yield f"A load change of 1 % of output throws PV {further}: {before} % → {after} % of range."
    pair = _both(was.load_step.recovery_time_s, will.load_step.recovery_time_s)
    if pair is not None and pair[0] > 0 and pair[1] > 0 and not _same(*pair):
        yield f"It recovers from a load {_faster(*pair)}: {time(pair[0])} → {time(pair[1])}."


def _noise(was: Analysis, will: Analysis) -> Iterator[str]:
    if was.noise is None or will.noise is None:
        return
    one, other = was.noise.output_travel_per_scan, will.noise.output_travel_per_scan
    if one is None or other is None:
        one, other = was.noise.output_gain_high_frequency, will.noise.output_gain_high_frequency
    if other == "unbounded" and one != "unbounded":
        yield "Noise on PV reaches the output without limit: the derivative has no filter."
    pair = _both(one, other)
    if pair is not None and pair[0] > 0 and pair[1] > 0 and not _same(*pair):
        more = pair[1] > pair[0]
        ratio = pair[1] / pair[0] if more else pair[0] / pair[1]
        yield f"Noise on PV moves the output {three_digits(ratio)} times {'more' if more else 'less'}."


def _both(one: Quantity, other: Quantity) -> tuple[float, float] | None:
    return (one, other) if isinstance(one, float) and isinstance(other, float) else None


def _same(one: float, other: float) -> bool:
    return abs(other - one) <= SAME_SHARE * max(abs(one), abs(other))


def _told(value: Quantity, unit: str) -> str:
    return three_digits(value) + (unit if isinstance(value, float) else "")
