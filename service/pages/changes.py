"""What changes: each setting before and after, in words and as entered, with the change in per cent."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

from service.analysis.plant import Ranges
from service.judgement.wording import UNITS, setting_name
from service.pages import words
from service.records.comparison import compare
from service.records.content import InstallationContent, SignedContent
from service.records.views import Comparison, SettingChange
from service.sheets.gain_tables import GainLine, GainTable

_RECORDED = "recorded_settings."


@dataclass(frozen=True, slots=True)
class ChangeLine:
    """One setting. `before` empty where no earlier gains are on record."""

    name: str
    before: str
    before_unit: str
    after: str
    after_unit: str
    percent: float | None
    changed: bool


@dataclass(frozen=True, slots=True)
class ChangeTable:
    """One set of gains beside the one before it."""

    condition: str
    lines: tuple[ChangeLine, ...]
    """The gains, and whatever else changes."""
    unchanged: tuple[ChangeLine, ...]
    """What has to stand on the display beside the gains and stays as it was, or was never recorded before."""
    in_common_form: tuple[ChangeLine, ...]
    """Where form or units changed: what changes when both are brought to the parallel form; else empty."""
    recorded: tuple[ChangeLine, ...]
    """Settings that no analysis has looked at."""
    earlier_known: bool
    nothing_changes: bool


def change_table(table: GainTable, comparison: Comparison | None) -> ChangeTable:
    """Put the sheet's table of gains and the records' comparison of them side by side."""
    percents = {}
    if comparison and comparison.common_form is None:
        percents = {change.setting: change.percent for change in comparison.settings}
    gains = tuple(_line(line, percents.get(_setting(line)), line.before) for line in table.gains)
    # of the settings the sheet leaves out what was before where it did not change
    settings = tuple(_line(line, None, line.before or line.value) for line in table.settings)
    return ChangeTable(
        condition=table.condition,
        lines=gains + tuple(line for line in settings if line.changed),
        unchanged=tuple(line for line in settings if not line.changed),
        in_common_form=_in_common_form(comparison),
        recorded=tuple(_recorded(table, comparison)),
        earlier_known=comparison is not None,
        nothing_changes=comparison is not None and comparison.same_gains,
    )


def installed_otherwise(content: SignedContent, done: InstallationContent) -> tuple[ChangeLine, ...]:
    """Where as left differs from the approved sets: `before` is what was approved, `after` what was left."""
    return tuple(_left_otherwise(content, done))


def _left_otherwise(content: SignedContent, done: InstallationContent) -> Iterator[ChangeLine]:
    lefts = tuple(done.sets_as_left())
    ranges = Ranges(pv=content.loop.pv, output=content.loop.output)
    for held, left in lefts:
        approved = content.gain_sets[held.gain_set]
        compared = compare(approved.controller, left, ranges)
        told = words.told_value if compared.common_form is None else words.computed_value
        for change in compared.settings:
            if change.changed:
                line = _compared(change, told)
                several = len(lefts) > 1
                yield replace(line, name=f"{approved.condition}: {line.name}") if several else line


def _line(line: GainLine, percent: float | None, before: str) -> ChangeLine:
    changed = bool(before) and (before, line.before_unit) != (line.value, line.unit)
    return ChangeLine(
        name=line.name,
        before=before,
        before_unit=line.before_unit,
        after=line.value,
        after_unit=line.unit,
        percent=percent if changed else None,
        changed=changed,
    )


def _setting(line: GainLine) -> str:
    """The interface's name of a setting: "Derivative filter (Tf)" is `derivative_filter`."""
    return line.name.split(" (")[0].lower().replace(" ", "_")


def _in_common_form(comparison: Comparison | None) -> tuple[ChangeLine, ...]:
    if comparison is None or comparison.common_form is None:
        return ()
    return tuple(
        _compared(change, words.computed_value)
        for change in comparison.settings
        if change.changed and not change.setting.startswith((_RECORDED, "algorithm"))
    )


def _recorded(table: GainTable, comparison: Comparison | None) -> Iterator[ChangeLine]:
    if comparison is None:
        for told in table.recorded:
            yield ChangeLine(told.name, "", "", told.value, told.unit, None, changed=False)
        return
    for change in comparison.settings:
        if change.setting.startswith(_RECORDED):
            yield _compared(change, words.told_value)


def _compared(change: SettingChange, told: Callable[[float | str | None], str]) -> ChangeLine:
    unit = UNITS.get(change.unit, change.unit)
    before, after = told(change.before), told(change.after)
    return ChangeLine(
        name=setting_name(change.setting),
        before=before,
        before_unit=unit if before[:1].isdigit() else "",
        after=after,
        after_unit=unit if after[:1].isdigit() else "",
        percent=change.percent,
        changed=change.changed,
    )
