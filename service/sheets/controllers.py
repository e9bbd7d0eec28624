"""A controller in words: what is typed in, exactly as it was entered, and all that must agree with it."""

from __future__ import annotations

from dataclasses import dataclass

from service.analysis.controller import (
    Controller,
    DerivativeFilter,
    DerivativeGain,
    DerivativeTime,
    FilterTime,
    IntegralGain,
    IntegralTime,
    Proportional,
    Root,
    Scan,
    SetpointWeight,
    TwoZerosController,
    as_complex,
)
from service.judgement.digits import as_entered
from service.judgement.wording import ACTIONS, ALGORITHMS, FORMS, GAIN_BASES, SCAN_METHODS, UNITS

FORMULAS = {
    "ideal": "C(s) = Kc·(1 + 1/(Ti·s) + Td·s/(1 + Tf·s))",
    "series": "C(s) = Kc·(1 + 1/(Ti·s))·(1 + Td·s)/(1 + Tf·s)",
    "parallel": "C(s) = Kp + Ki/s + Kd·s/(1 + Tf·s)",
    "two_zeros": "C(s) = k·(s − z1)·(s − z2)/(s·(1 + Tf·s)); with one zero k·(s − z1)/s",
}
NONE = "none"
UNKNOWN = "unknown: read it at the controller"
UNIT_SYMBOLS = {
    "percent_band": "100/{gain}",
    "repeats_per_second": "1/Ti",
    "repeats_per_minute": "1/Ti",
    "ratio": "Td/Tf",
}

Term = (
    Proportional
    | IntegralTime
    | IntegralGain
    | DerivativeTime
    | DerivativeGain
    | DerivativeFilter
    | FilterTime
)


@dataclass(frozen=True, kw_only=True, slots=True)
class Told:
    """One setting in words. `unit` empty where the value says it, or where there is none."""

    name: str
    value: str
    unit: str = ""


def gains(controller: Controller) -> tuple[Told, ...]:
    """The numbers that are typed in, as entered."""
    if isinstance(controller, TwoZerosController):
        return (
            Told(name="Gain k", value=as_entered(controller.gain), unit="gain"),
            *_zeros(controller.zeros_rad_s),
            _term("Derivative filter", "Tf", controller.derivative_filter),
        )
    symbols = ("Kp", "Ki", "Kd") if controller.form == "parallel" else ("Kc", "Ti", "Td")
    return (
        _term("Proportional", symbols[0], controller.proportional),
        _term("Integral", symbols[1], controller.integral),
        _term("Derivative", symbols[2], controller.derivative),
        _term("Derivative filter", "Tf", controller.derivative_filter),
    )


def surroundings(controller: Controller) -> tuple[Told, ...]:
    """What has to stand on the controller's display beside the gains for these to mean what was analysed."""
    return (
        Told(name="Form", value=FORMS[controller.form]),
        Told(name="Formula", value=FORMULAS[controller.form]),
        Told(name="Action", value=ACTIONS[controller.action]),
        Told(name="Filter on PV", value=_measurement_filter(controller.measurement_filter_s)),
        Told(name="Set-point weights", value=_weights(controller.setpoint_weight)),
        Told(name="Scan", value=_scan(controller.scan)),
        Told(name="Gain is told as", value=GAIN_BASES[controller.gain_basis]),
        Told(name="Algorithm", value=ALGORITHMS[controller.algorithm]),
    )


def recorded(controller: Controller) -> tuple[Told, ...]:
    """Settings that are recorded and signed, but that no analysis has looked at."""
    return tuple(
        Told(
            name=setting.name,
            value=setting.value if isinstance(setting.value, str) else as_entered(setting.value),
            unit=setting.unit,
        )
        for setting in controller.recorded_settings
    )


def _term(name: str, symbol: str, term: Term | str | None) -> Told:
    if term is None:
        return Told(name=name, value=NONE)
    if isinstance(term, str):
        return Told(name=name, value=UNKNOWN)
    symbol = _symbol(symbol, term)
    return Told(
        name=f"{name} ({symbol})", value=as_entered(term.value, term.displayed), unit=UNITS[term.unit]
    )


def _symbol(symbol: str, term: Term) -> str:
    """The symbol of the formula, or what stands in its place in the unit of the term."""
    if isinstance(term, IntegralGain) and term.unit in ("seconds", "minutes"):
        return "1/Ki"
    return UNIT_SYMBOLS.get(term.unit, symbol).format(gain=symbol)


def _zeros(zeros_rad_s: tuple[Root, ...]) -> tuple[Told, ...]:
    return tuple(
        Told(name=f"Zero z{index}", value=root_as_entered(zero), unit="rad/s")
        for index, zero in enumerate(zeros_rad_s, start=1)
    )


def root_as_entered(root: Root) -> str:
    """A root in rad/s with all its digits: −0.05, or −0.05 + 0.02j."""
    value = as_complex(root)
    real = as_entered(value.real).replace("-", "−")
    if value.imag == 0:
        return real
    sign = "−" if value.imag < 0 else "+"
    return f"{real} {sign} {as_entered(abs(value.imag))}j"


def _measurement_filter(filter_s: float | str) -> str:
    if isinstance(filter_s, str):
        return UNKNOWN
    return f"first-order lag of {as_entered(filter_s)} seconds" if filter_s else NONE


def _weights(weight: SetpointWeight | str) -> str:
    if isinstance(weight, str):
        return UNKNOWN
    return f"proportional {as_entered(weight.proportional)}, derivative {as_entered(weight.derivative)}"


def _scan(scan: Scan | str | None) -> str:
    if scan is None:
        return "none: continuous"
    if isinstance(scan, str):
        return UNKNOWN
    told = f"every {as_entered(scan.interval_s)} seconds, {SCAN_METHODS[scan.method]}"
    return (
        f"{told}, output delayed by {as_entered(scan.output_delay_s)} seconds"
        if scan.output_delay_s
        else told
    )
