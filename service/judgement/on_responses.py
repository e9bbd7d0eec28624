"""Findings on margins and responses of a loop."""

from __future__ import annotations

from service.analysis.results import LoopFacts, Margins
from service.judgement.digits import three_digits, time
from service.judgement.finding import Case, Finding, Weight

OFFSET_MIN = 1e-6
"""Share of a step from which on an offset is told; below it is rounding."""

_LOOP_TYPES = {
    0: "PV does not come to rest at the set point of its own accord",
    1: "PV comes to rest at a constant set point, and stays back behind a steadily moving one",
}
_LOOP_TYPE_TWO_OR_MORE = (
    "PV follows even a steadily moving set point; after a step of an unweighted set point it has to overshoot"
)
_LESS_GAIN = (
    "another valve or sensor span, a fouled sensor, an operating point with less gain, an output at its limit"
)

_NOTES: dict[str, tuple[Weight, str]] = {
    "margins_too_much_work": (
        "caution",
        "The loop gain passes 1 too often for the margins to be computed: the dead time is very long beside "
        "the other times of the loop. There are no margins.",
    ),
    "control_sensitivity_too_much_work": (
        "caution",
        "By how much the loop can amplify noise of PV at its worst frequency was not computed: the dead time "
        "is very long beside the other times of the loop. There is no maximum control sensitivity.",
    ),
    "delay_margin_not_confirmed": (
        "caution",
        "How much more dead time the scanned loop bears was not computed: two ways to find it do not agree. "
        "There is no delay margin.",
    ),
    "responses_not_realisable": (
        "caution",
        "An unfiltered derivative acts on a process that answers at once: there is no response to show.",
    ),
    "responses_too_slow": (
        "caution",
        "The loop comes to rest so slowly beside its fastest part that the response was not followed to its "
        "end. Figures that need the end are left out.",
    ),
    "responses_not_from_points": (
        "note",
        "The process is known by measured points of its frequency response, which give no step response. "
        "Figures that need one are left out; the margins come from a rational fit of the same points.",
    ),
    "setpoint_impulse": (
        "note",
        "The unfiltered derivative sees the set point: at a step of it the output jumps without limit.",
    ),
    "numbers_out_of_range": (
        "caution",
        "Numbers of this loop are too large or too small to compute with; what needs them is left out. Check "
        "the units.",
    ),
}
"""Codes of `Analysis.notes` → weight and sentence."""


def setpoint_offset(case: Case) -> Finding | None:
    """PV does not come to rest at the set point."""
    step = case.judged.setpoint_step if case.judged else None
    if step is None or not isinstance(step.final_value, float) or abs(step.final_value - 1) < OFFSET_MIN:
        return None
    rest = 0.0 if abs(step.final_value) < OFFSET_MIN else step.final_value
    short = (1 - rest) * 100
    side = f"{three_digits(short)} % short of it" if short > 0 else f"{three_digits(-short)} % beyond it"
    return Finding(
        finding="lasting_offset_setpoint",
        weight="caution",
        sentence=f"After a step of the set point PV comes to rest {side} (at "
        f"{three_digits(rest)} of the step), because {_offset_reason(case.facts, rest)}.",
    )


def _offset_reason(facts: LoopFacts, rest: float) -> str:
    if rest == 0:
        return "nothing lasting passes the loop"
    if facts.plant_integrates:
        return "the set-point weight is not 1 and the controller has no integral action"
    return "the controller has no integral action"


def load_offset(case: Case) -> Finding | None:
    """A lasting load leaves PV away from the set point."""
    step = case.judged.load_step if case.judged else None
    if step is None or not isinstance(step.final_value, float) or abs(step.final_value) < OFFSET_MIN:
        return None
    return Finding(
        finding="lasting_offset_load",
        weight="caution",
        sentence=f"A lasting load change worth 1 % of output leaves PV {three_digits(abs(step.final_value))} "
        "% of range away from where it was, because the controller has no integral action.",
    )


def loop_type(case: Case) -> Finding | None:
    """The loop's type in words, which hold for a loop that comes to rest."""
    if case.recomputation.verdict != "stable":
        return None
    number = case.recomputation.loop_type
    words = _LOOP_TYPES.get(number, _LOOP_TYPE_TWO_OR_MORE)
    return Finding(finding="loop_type", weight="note", sentence=f"Loop of type {number}: {words}.")


def gain_reduction(case: Case) -> Finding | None:
    """Less gain destabilises too; where that is nearer than more gain, it governs."""
    margins = _margins(case)
    if margins is None or not isinstance(margins.gain_reduction_margin, float):
        return None
    factor = margins.gain_reduction_margin
    if isinstance(margins.gain_margin, float) and margins.gain_margin * factor <= 1:
        return Finding(
            finding="gain_reduction_limited",
            weight="note",
            sentence=f"Less gain makes this loop unstable as well: at {three_digits(factor)} times the loop "
            f"gain ({_LESS_GAIN}).",
        )
    return Finding(
        finding="gain_reduction_governs",
        weight="caution",
        sentence=f"This loop becomes unstable when its gain falls to {three_digits(factor)} times what it is "
        f"here ({_LESS_GAIN}). That is nearer than too much gain. Do not turn the gain down to calm it.",
    )


def several_gain_crossovers(case: Case) -> Finding | None:
    """The loop gain passes 1 more than once."""
    margins = _margins(case)
    if margins is None or len(margins.gain_crossovers) < 2:
        return None
    return Finding(
        finding="several_gain_crossovers",
        weight="note",
        sentence=f"The loop gain passes 1 at {len(margins.gain_crossovers)} frequencies. Phase margin and "
        "delay margin are the least over all of them, and may come from different ones.",
    )


def margins_from_infinite_frequency(case: Case) -> Finding | None:
    """A margin is only approached, as the frequency grows without limit."""
    margins = _margins(case)
    if margins is None:
        return None
    approached = margins.max_sensitivity_rad_s == "unbounded" or any(
        crossover.rad_s == "unbounded" for crossover in margins.phase_crossovers
    )
    if not approached and margins.delay_margin_s != 0:
        return None
    late = " Any further dead time, however short, makes it unstable." if margins.delay_margin_s == 0 else ""
    return Finding(
        finding="margins_from_infinite_frequency",
        weight="caution",
        sentence="The loop gain does not fall off at high frequency, and margins come from there, where no "
        f"model of a process can be trusted.{late} A filter makes it fall off.",
    )


def crossovers_truncated(case: Case) -> Finding | None:
    """More crossovers exist than are listed."""
    margins = _margins(case)
    if margins is None or not margins.truncated:
        return None
    return Finding(
        finding="crossovers_truncated",
        weight="note",
        sentence="The loop has more crossover frequencies than are listed. The margins are taken over "
        "all of them.",
    )


def settling_time_sensitive(case: Case) -> Finding | None:
    """A turning point of the response lies next to the settling band."""
    step = case.judged.setpoint_step if case.judged else None
    if step is None or not step.settling_time_sensitive:
        return None
    return Finding(
        finding="settling_time_sensitive",
        weight="note",
        sentence=f"The settling time ({time(step.settling_time_s)}) hangs by a hair: a turn of the response "
        "just reaches or just misses the edge of the band. A small change of the model moves it by a "
        "whole swing.",
    )


def not_computed_parts(case: Case) -> list[Finding]:
    """What an analysis says it could not compute."""
    codes = dict.fromkeys(code for analysis in case.analyses for code in analysis.notes)
    return [Finding(finding=code, weight=_NOTES[code][0], sentence=_NOTES[code][1]) for code in codes]


def _margins(case: Case) -> Margins | None:
    return case.judged.margins if case.judged else None
