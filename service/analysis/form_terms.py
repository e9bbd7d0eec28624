"""The terms of one form in SI units, how they read in every unit, and the set-point path they make.

Used by `service.analysis.equivalents` alone. A term that is absent is 0 here, or None where 0 has no meaning.
"""

from __future__ import annotations

from dataclasses import dataclass

from service.analysis.controller import Scan
from service.analysis.results import EquivalentTerms, TermValue
from service.analysis.terms import SECONDS_PER_MINUTE

Coefficients = tuple[float, float, float]
"""Of 1, s and s² in the numerator over s·(1+Tf·s)."""


@dataclass(frozen=True, slots=True)
class ParallelForm:
    """Kp + Ki/s + Kd·s/(1+Tf·s), in seconds."""

    kp: float
    ki: float
    kd: float

    def told(self, tf_s: float, scan: Scan | None) -> EquivalentTerms:
        """The terms in every unit; the units of a scan only where there is one."""
        integral: tuple[TermValue, ...] = ()
        derivative: tuple[TermValue, ...] = ()
        if self.ki:
            integral = (
                _value(self.ki, "gain_per_second"),
                _value(self.ki * SECONDS_PER_MINUTE, "gain_per_minute"),
                _value(1.0 / self.ki, "seconds"),
                _value(1.0 / (self.ki * SECONDS_PER_MINUTE), "minutes"),
                *((_value(self.ki * scan.interval_s, "gain_per_scan"),) if scan else ()),
            )
        if self.kd:
            derivative = (
                _value(self.kd, "gain_seconds"),
                _value(self.kd / SECONDS_PER_MINUTE, "gain_minutes"),
                *((_value(self.kd / scan.interval_s, "gain_scans"),) if scan else ()),
            )
        return EquivalentTerms(
            proportional=_gain(self.kp or None),
            integral=integral,
            derivative=derivative,
            derivative_filter=_filter(tf_s if self.kd else 0.0, self.kd / self.kp if self.kp else 0.0),
        )

    def numerator(self, tf_s: float, b: float, c: float) -> Coefficients:
        """The path from the set point with weights b and c; with 1 and 1 the feedback path."""
        return (self.ki, b * self.kp + self.ki * tf_s, b * self.kp * tf_s + c * self.kd)


@dataclass(frozen=True, slots=True)
class _TimesForm:
    """Gain, integral time (None: none) and derivative time in seconds (0: none)."""

    gain: float | None
    ti_s: float | None
    td_s: float

    def told(self, tf_s: float, scan: Scan | None) -> EquivalentTerms:
        """The terms in every unit."""
        del scan  # no unit of these forms counts in scans
        ti, td = self.ti_s, self.td_s
        integral: tuple[TermValue, ...] = ()
        if ti is not None:
            integral = (
                _value(ti, "seconds"),
                _value(ti / SECONDS_PER_MINUTE, "minutes"),
                _value(1.0 / ti, "repeats_per_second"),
                _value(SECONDS_PER_MINUTE / ti, "repeats_per_minute"),
            )
        return EquivalentTerms(
            proportional=_gain(self.gain),
            integral=integral,
            derivative=(_value(td, "seconds"), _value(td / SECONDS_PER_MINUTE, "minutes")) if td else (),
            derivative_filter=_filter(tf_s if td else 0.0, td),
        )


@dataclass(frozen=True, slots=True)
class IdealForm(_TimesForm):
    """Kc·(1 + 1/(Ti·s) + Td·s/(1+Tf·s)). `gain` None: no proportional term, and 1 in the two others."""

    def numerator(self, tf_s: float, b: float, c: float) -> Coefficients:
        """The path from the set point with weights b and c; with 1 and 1 the feedback path."""
        factor = 1.0 if self.gain is None else self.gain
        ki = factor / self.ti_s if self.ti_s else 0.0
        return ParallelForm(self.gain or 0.0, ki, factor * self.td_s).numerator(tf_s, b, c)


@dataclass(frozen=True, slots=True)
class SeriesForm(_TimesForm):
    """Kc·(1 + 1/(Ti·s))·(1+Td·s)/(1+Tf·s)."""

    gain: float

    def numerator(self, tf_s: float, b: float, c: float) -> Coefficients:
        """The path from the set point with weights b and c; with 1 and 1 the feedback path."""
        # the weight c moves the lead of the set point from Td towards Tf
        lead_s = tf_s + c * (self.td_s - tf_s) if self.td_s else 0.0
        ki = self.gain / self.ti_s if self.ti_s else 0.0
        return (ki, b * self.gain + ki * lead_s, b * self.gain * lead_s)


@dataclass(frozen=True, slots=True)
class ZerosForm:
    """k·(s−z1)·(s−z2)/(s·(1+Tf·s)), or k·(s−z1)/s."""

    gain: float
    zeros: tuple[complex, ...]

    def told(self, tf_s: float, scan: Scan | None) -> EquivalentTerms:
        """k, the zeros in rad/s and the filter time in every unit."""
        del scan  # no unit of this form counts in scans
        zeros = tuple(zero.real if zero.imag == 0 else (zero.real, zero.imag) for zero in self.zeros)
        return EquivalentTerms(gain=self.gain, zeros_rad_s=zeros, derivative_filter=_filter(tf_s, 0.0))

    def numerator(self, tf_s: float, b: float, c: float) -> Coefficients:
        """The path from the set point with weights b and c; with 1 and 1 the feedback path."""
        del tf_s  # the numerator of this form is what is entered
        k = self.gain
        if len(self.zeros) == 1:
            return (-k * self.zeros[0].real, b * k, 0.0)
        first, second = self.zeros
        return (k * (first * second).real, -b * k * (first + second).real, c * k)


FormTerms = IdealForm | SeriesForm | ParallelForm | ZerosForm


def _gain(gain: float | None) -> tuple[TermValue, ...]:
    return () if gain is None else (_value(gain, "gain"), _value(100.0 / gain, "percent_band"))


def _filter(tf_s: float, td_s: float) -> tuple[TermValue, ...]:
    """Tf in every unit; the ratio only where there is a derivative time for it to be of."""
    if tf_s == 0:
        return ()
    times = (_value(tf_s, "seconds"), _value(tf_s / SECONDS_PER_MINUTE, "minutes"))
    return (*times, _value(td_s / tf_s, "ratio")) if td_s else times


def _value(value: float, unit: str) -> TermValue:
    return TermValue(value=value, unit=unit)
