"""Two controllers held against one another, in any form, to 1e-9.

Same gains are what the analysis sees: action, terms, filters, set-point weights, scan, all brought to per
cent of range. How a controller shows them, its algorithm and its recorded settings may differ without
their being other gains; that is said beside it.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from service.analysis.controller import Controller, Root, Scan, TwoZerosController
from service.analysis.plant import Ranges
from service.analysis.terms import ParallelTerms, controller_terms
from service.records.content import Difference
from service.records.views import Comparison, SettingChange

RELATIVE_TOLERANCE = 1e-9

Value = float | str | None

_TERMS = ("proportional", "integral", "derivative", "derivative_filter")


@dataclass(frozen=True, slots=True)
class _Setting:
    """One setting of both controllers. `gains`: a difference here makes them other gains."""

    name: str
    unit: str
    before: Value
    after: Value
    gains: bool


def compare(before: Controller | None, after: Controller, ranges: Ranges) -> Comparison:
    """Compare term by term: as entered where form and units agree, else in the parallel form in seconds."""
    as_entered = before is None or _laid_out_alike(before, after)
    settings = tuple(_settings(before, after, ranges, as_entered))
    return Comparison(
        common_form=None if as_entered else "parallel",
        same_gains=before is not None and same_gains(before, after, ranges),
        settings=tuple(_change(setting) for setting in settings),
    )


def same_gains(one: Controller, other: Controller, ranges: Ranges) -> bool:
    """Say whether two controllers hold the same gains, in whatever form, to 1e-9."""
    return not any(_differ(setting) for setting in _in_common(one, other, ranges) if setting.gains)


def differences(recorded: Controller, found: Controller, ranges: Ranges) -> tuple[Difference, ...]:
    """List what differs, in the parallel form; `hinders` where the gains are other gains."""
    settings = (*_in_common(recorded, found, ranges), *_recorded(recorded, found))
    return tuple(
        Difference(
            setting=setting.name,
            unit=setting.unit,
            recorded=setting.before,
            found=setting.after,
            hinders=setting.gains,
        )
        for setting in settings
        if _differ(setting)
    )


def _settings(
    before: Controller | None, after: Controller, ranges: Ranges, as_entered: bool
) -> Iterator[_Setting]:
    if as_entered:
        yield from _entered(before, after)
        yield from _weights(before, after)
        yield from _surroundings(before, after)
    elif before is not None:
        yield from _in_common(before, after, ranges)
    yield from _recorded(before, after)


def _laid_out_alike(before: Controller, after: Controller) -> bool:
    """Say whether form, gain basis, and the units of the terms that both have are the same."""
    if (before.form, before.gain_basis) != (after.form, after.gain_basis):
        return False
    units = ((_unit(before, name), _unit(after, name)) for name in _TERMS)
    return all(old == new for old, new in units if old is not None and new is not None)


def _unit(controller: Controller, name: str) -> str | None:
    unit: str | None = getattr(getattr(controller, name, None), "unit", None)
    return unit


def _entered(before: Controller | None, after: Controller) -> Iterator[_Setting]:
    if isinstance(after, TwoZerosController):
        earlier = before if isinstance(before, TwoZerosController) else None
        yield _Setting("gain", "gain", earlier.gain if earlier else None, after.gain, True)
        zeros = (_zeros(earlier.zeros_rad_s) if earlier else None, _zeros(after.zeros_rad_s))
        yield _Setting("zeros_rad_s", "rad_s", *zeros, True)
        names: tuple[str, ...] = ("derivative_filter",)
    else:
        names = _TERMS
    for name in names:
        unit = _unit(after, name) or (_unit(before, name) if before else None) or ""
        old = _entered_value(getattr(before, name, None))
        yield _Setting(name, unit, old, _entered_value(getattr(after, name)), True)


def _entered_value(term: object) -> Value:
    value: Value = term if isinstance(term, str) else getattr(term, "value", None)
    return value


def _zeros(zeros: tuple[Root, ...]) -> str:
    return ", ".join(
        f"{zero[0]:g}{zero[1]:+g}j" if isinstance(zero, tuple) else f"{zero!r}" for zero in zeros
    )


def _in_common(before: Controller, after: Controller, ranges: Ranges) -> Iterator[_Setting]:
    """Both controllers in the parallel form, in per cent of range and seconds.

    A set-point weight means one thing in one form and another in the next, so what the set point sees is
    compared in its place.
    """
    old, new = _terms(before, ranges), _terms(after, ranges)
    scale = _Scale.of(old, new)
    yield _term("proportional", "gain", old.kp, new.kp, scale.kp)
    yield _term("integral", "gain_per_second", old.ki_per_s, new.ki_per_s, scale.ki_per_s)
    yield _term("derivative", "gain_seconds", old.kd_s, new.kd_s, scale.kd_s)
    unknown = "unknown" in (before.derivative_filter, after.derivative_filter)
    filters = (_filter(before, old), _filter(after, new)) if unknown else (old.tf_s, new.tf_s)
    yield _Setting("derivative_filter", "seconds", *filters, True)
    yield from _setpoint_path(before, after, ranges)
    yield from _surroundings(before, after)


def _setpoint_path(before: Controller, after: Controller, ranges: Ranges) -> Iterator[_Setting]:
    if isinstance(before.setpoint_weight, str) or isinstance(after.setpoint_weight, str):
        yield from _weights(before, after)
        return
    old, new = _terms(before, ranges, path="setpoint"), _terms(after, ranges, path="setpoint")
    scale = _Scale.of(old, new)
    yield _term("setpoint_proportional", "gain", old.kp, new.kp, scale.kp)
    yield _term("setpoint_derivative", "gain_seconds", old.kd_s, new.kd_s, scale.kd_s)


def _terms(
    controller: Controller, ranges: Ranges, path: Literal["feedback", "setpoint"] = "feedback"
) -> ParallelTerms:
    terms: ParallelTerms = getattr(controller_terms(controller), path)
    if controller.gain_basis == "percent_of_range":
        return terms
    # output units over PV units times PV span over output span is per cent over per cent
    factor = ranges.pv.span / ranges.output.span
    return ParallelTerms(factor * terms.kp, factor * terms.ki_per_s, factor * terms.kd_s, terms.tf_s)


@dataclass(frozen=True, slots=True)
class _Scale:
    """What a difference in each term is held against: changing the form cancels digits between the terms."""

    kp: float
    ki_per_s: float
    kd_s: float

    @staticmethod
    def of(one: ParallelTerms, other: ParallelTerms) -> _Scale:
        tf = max(one.tf_s, other.tf_s)
        ki = max(abs(one.ki_per_s), abs(other.ki_per_s))
        kp = max(abs(one.kp), abs(other.kp), ki * tf)
        return _Scale(kp, ki, max(abs(one.kd_s), abs(other.kd_s), kp * tf))


def _term(name: str, unit: str, before: float, after: float, scale: float) -> _Setting:
    """Take values that differ by less than the tolerance of the scale for one and the same."""
    same = abs(before - after) <= RELATIVE_TOLERANCE * scale
    return _Setting(name, unit, before, before if same else after, True)


def _filter(controller: Controller, terms: ParallelTerms) -> Value:
    return "unknown" if controller.derivative_filter == "unknown" else terms.tf_s


def _surroundings(before: Controller | None, after: Controller) -> Iterator[_Setting]:
    def both(name: str) -> tuple[Value, Value]:
        return (None if before is None else getattr(before, name)), getattr(after, name)

    yield _Setting("action", "", *both("action"), True)
    yield _Setting("measurement_filter_s", "seconds", *both("measurement_filter_s"), True)
    for name, unit in (("interval_s", "seconds"), ("method", ""), ("output_delay_s", "seconds")):
        old = None if before is None else _scan(before, name)
        yield _Setting(f"scan.{name}", unit, old, _scan(after, name), True)


def _weights(before: Controller | None, after: Controller) -> Iterator[_Setting]:
    for name in ("proportional", "derivative"):
        old = None if before is None else _weight(before, name)
        yield _Setting(f"setpoint_weight.{name}", "", old, _weight(after, name), True)


def _weight(controller: Controller, name: str) -> Value:
    if isinstance(controller.setpoint_weight, str):
        return controller.setpoint_weight
    value: float = getattr(controller.setpoint_weight, name)
    return value


def _scan(controller: Controller, name: str) -> Value:
    if not isinstance(controller.scan, Scan):
        return controller.scan
    value: Value = getattr(controller.scan, name)
    return value


def _recorded(before: Controller | None, after: Controller) -> Iterator[_Setting]:
    yield _Setting("algorithm", "", before.algorithm if before else None, after.algorithm, False)
    old = {setting.name: setting for setting in (before.recorded_settings if before else ())}
    new = {setting.name: setting for setting in after.recorded_settings}
    for name in sorted(old | new):
        unit = (new.get(name) or old[name]).unit
        values = (old[name].value if name in old else None, new[name].value if name in new else None)
        yield _Setting(f"recorded_settings.{name}", unit, *values, False)


def _differ(setting: _Setting) -> bool:
    before, after = setting.before, setting.after
    if isinstance(before, str) or isinstance(after, str) or before is None or after is None:
        return before != after
    return abs(before - after) > RELATIVE_TOLERANCE * max(abs(before), abs(after))


def _change(setting: _Setting) -> SettingChange:
    return SettingChange(
        setting=setting.name,
        unit=setting.unit,
        before=setting.before,
        after=setting.after,
        percent=_percent(setting.before, setting.after),
        changed=_differ(setting),
    )


def _percent(before: Value, after: Value) -> float | None:
    if isinstance(before, str) or isinstance(after, str) or before is None or after is None or before == 0:
        return None
    return 100.0 * (after - before) / abs(before)
