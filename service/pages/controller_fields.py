"""A controller as fields of a form: what is typed from its display, and the document that it makes.

A value is typed as the display shows it; the text goes into `displayed` beside the number that it says.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass

from service.analysis.controller import (
    Controller,
    ParallelController,
    Root,
    Scan,
    SetpointWeight,
    TwoZerosController,
)
from service.documents.strict_json import Plain
from service.judgement.digits import as_entered
from service.judgement.wording import ACTIONS, FORMS, SCAN_METHODS, UNITS
from service.pages.forms import Form, Problem
from service.pages.options import Option
from service.sheets import controllers
from service.sheets.controllers import root_as_entered

FORM_OPTIONS = tuple(Option(form, words) for form, words in FORMS.items() if form != "two_zeros")
ACTION_OPTIONS = tuple(Option(action, words) for action, words in ACTIONS.items())
SCAN_OPTIONS = (
    Option("", "no scan: continuous"),
    Option("unknown", "unknown"),
    *(Option(method, words) for method, words in SCAN_METHODS.items()),
)
TERM_UNITS: dict[str, tuple[str, ...]] = {
    "proportional": ("gain", "percent_band"),
    "integral": (
        "seconds",
        "minutes",
        "repeats_per_second",
        "repeats_per_minute",
        "gain_per_second",
        "gain_per_minute",
        "gain_per_scan",
    ),
    "derivative": ("seconds", "minutes", "gain_seconds", "gain_minutes", "gain_scans"),
    "derivative_filter": ("seconds", "minutes", "ratio"),
}
"""Each term with all its units; which of them go with which form is said when the document is read."""

NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
NOT_A_NUMBER = "Write a number in digits, with a point before the decimals: 2.50."


@dataclass(frozen=True, slots=True)
class TermField:
    """A term's value and unit; `approved` is what the display should show, empty for gains as found."""

    name: str
    label: str
    units: tuple[Option, ...]
    hint: str


@dataclass(frozen=True, slots=True)
class LineField:
    """One more setting that is typed from the display."""

    name: str
    label: str
    hint: str


@dataclass(frozen=True, slots=True)
class ControllerFields:
    """The fields of one controller; `two_zeros`: gain and zeros stand in place of the three terms."""

    prefix: str
    two_zeros: bool
    terms: tuple[TermField, ...]
    lines: tuple[LineField, ...]
    recorded: tuple[LineField, ...]


def fields_of(prefix: str, model: Controller, *, show_values: bool) -> ControllerFields:
    """The fields for a controller entered like `model`; with its values as hints where they are shown."""
    two_zeros = isinstance(model, TwoZerosController)
    return ControllerFields(
        prefix=prefix,
        two_zeros=two_zeros,
        terms=tuple(_terms(prefix, model, show_values)),
        lines=tuple(_lines(prefix, model, show_values)),
        recorded=tuple(
            LineField(f"{prefix}-recorded-{index}", f"{setting.name} {setting.unit}".strip(), "")
            for index, setting in enumerate(model.recorded_settings)
        ),
    )


def first_texts(prefix: str, model: Controller) -> dict[str, str]:
    """What stands in the fields before anything is typed: form, units and surroundings, but no gain."""
    weight, scan, filter_s = model.setpoint_weight, model.scan, model.measurement_filter_s
    texts = {
        "form": model.form,
        "measurement_filter_s": filter_s if isinstance(filter_s, str) else as_entered(filter_s),
        "setpoint_weight-proportional": _weight(weight, "proportional"),
        "setpoint_weight-derivative": _weight(weight, "derivative"),
        "scan-method": scan.method if isinstance(scan, Scan) else scan or "",
        "scan-interval_s": as_entered(scan.interval_s) if isinstance(scan, Scan) else "",
        "scan-output_delay_s": as_entered(scan.output_delay_s) if isinstance(scan, Scan) else "",
    }
    for term in TERM_UNITS:
        entered = getattr(model, term, None)
        texts[f"{term}-unit"] = getattr(entered, "unit", "") or _usual_unit(term, model)
    return {f"{prefix}-{name}": text for name, text in texts.items()}


def plain_of(form: Form, prefix: str, model: Controller) -> tuple[dict[str, Plain], tuple[Problem, ...]]:
    """The controller as typed, and a problem for each text that is no number."""
    reader = _Reader(form, prefix)
    plain: dict[str, Plain] = {
        "form": reader.text("form"),
        "action": reader.text("action"),
        "measurement_filter_s": reader.number_or_unknown("measurement_filter_s"),
        "setpoint_weight": reader.weights(),
        "scan": reader.scan(),
        "gain_basis": model.gain_basis,
        "algorithm": model.algorithm,
        "recorded_settings": reader.recorded(model),
    }
    if isinstance(model, TwoZerosController):
        plain |= {"form": "two_zeros", "gain": reader.number("gain"), "zeros_rad_s": reader.zeros()}
        plain["derivative_filter"] = reader.term("derivative_filter")
    else:
        plain |= {term: reader.term(term) for term in TERM_UNITS}
    left_out = [name for name in ("action", "form") if not plain[name]]
    for name in left_out:
        del plain[name]
    return plain, tuple(reader.problems)


class _Reader:
    """Reads the fields of one controller and gathers what is wrong with them."""

    def __init__(self, form: Form, prefix: str) -> None:
        self.form, self.prefix = form, prefix
        self.problems: list[Problem] = []

    def text(self, name: str) -> str:
        return self.form.typed(f"{self.prefix}-{name}").strip()

    def number(self, name: str) -> float | None:
        text = self.text(name)
        if not text:
            return None
        number = float(text) if NUMBER.fullmatch(text) else math.nan
        if not math.isfinite(number):
            self.problems.append(Problem(NOT_A_NUMBER, f"{self.prefix}-{name}"))
            return None
        return number

    def number_or_unknown(self, name: str) -> float | str:
        return "unknown" if self.text(name) == "unknown" else self.number(name) or 0.0

    def term(self, name: str) -> Plain:
        if self.text(f"{name}-value") == "unknown" and name == "derivative_filter":
            return "unknown"
        value = self.number(f"{name}-value")
        if value is None:
            return None
        return {"value": value, "unit": self.text(f"{name}-unit"), "displayed": self.text(f"{name}-value")}

    def weights(self) -> Plain:
        names = ("proportional", "derivative")
        if any(self.text(f"setpoint_weight-{name}") == "unknown" for name in names):
            return "unknown"
        return {name: self.number(f"setpoint_weight-{name}") or 0.0 for name in names}

    def scan(self) -> Plain:
        method = self.text("scan-method")
        if not method or method == "unknown":
            return method or None
        interval_s, delay_s = self.number("scan-interval_s"), self.number("scan-output_delay_s")
        return {"interval_s": interval_s, "method": method, "output_delay_s": delay_s or 0.0}

    def zeros(self) -> list[Plain]:
        roots = (self.root(name) for name in ("zeros_rad_s-0", "zeros_rad_s-1"))
        return [root for root in roots if root is not None]

    def root(self, name: str) -> Plain:
        real, imaginary = self.number(name), self.number(f"{name}-imaginary")
        return [real or 0.0, imaginary] if imaginary else real

    def recorded(self, model: Controller) -> list[Plain]:
        found: list[Plain] = []
        for index, setting in enumerate(model.recorded_settings):
            text = self.text(f"recorded-{index}")
            if text:
                value: Plain = float(text) if NUMBER.fullmatch(text) else text
                found.append({"name": setting.name, "value": value, "unit": setting.unit})
        return found


def _terms(prefix: str, model: Controller, show_values: bool) -> Iterator[TermField]:
    told = {each.name.split(" (")[0].lower().replace(" ", "_"): each for each in controllers.gains(model)}
    names = ("derivative_filter",) if isinstance(model, TwoZerosController) else tuple(TERM_UNITS)
    for name in names:
        units = tuple(Option(unit, UNITS[unit]) for unit in TERM_UNITS[name])
        value = told[name]
        hint = f"Approved: {value.value} {value.unit}".strip() + "." if show_values else ""
        label = name.replace("_", " ").capitalize()
        yield TermField(f"{prefix}-{name}", label, units, hint)


def _lines(prefix: str, model: Controller, show_values: bool) -> Iterator[LineField]:
    if not isinstance(model, TwoZerosController):
        return
    hint = f"Approved: {as_entered(model.gain)}." if show_values else ""
    yield LineField(f"{prefix}-gain", "Gain k", hint)
    for index in (0, 1):
        zero = model.zeros_rad_s[index] if index < len(model.zeros_rad_s) else None
        told = _zero_hint(zero) if show_values else ""
        yield LineField(f"{prefix}-zeros_rad_s-{index}", f"Zero z{index + 1}, real part, rad/s", told)
        yield LineField(f"{prefix}-zeros_rad_s-{index}-imaginary", f"Zero z{index + 1}, imaginary part", "")


def _zero_hint(zero: Root | None) -> str:
    return "Approved: none." if zero is None else f"Approved: {root_as_entered(zero)}."


def _weight(weight: SetpointWeight | str, name: str) -> str:
    return weight if isinstance(weight, str) else as_entered(getattr(weight, name))


def _usual_unit(term: str, model: Controller) -> str:
    """A unit to begin with where `model` has no such term."""
    if isinstance(model, ParallelController):
        return {"integral": "gain_per_second", "derivative": "gain_seconds"}.get(term, TERM_UNITS[term][0])
    return TERM_UNITS[term][0]
