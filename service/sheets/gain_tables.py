"""The gains as they are typed in, beside those that they take the place of."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from service.judgement.digits import three_digits
from service.records.content import SignedContent, SignedGains
from service.records.views import Comparison, SubmissionView
from service.sheets import controllers
from service.sheets.controllers import Told


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


def gain_tables(view: SubmissionView) -> Iterator[GainTable]:
    """One table for each set of gains."""
    signed = view.content
    for index, gain_set in enumerate(signed.gain_sets):
        before, _ = set_before(signed, index)
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


def set_before(signed: SignedContent, index: int) -> tuple[SignedGains | None, int]:
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
