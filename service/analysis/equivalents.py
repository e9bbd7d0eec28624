"""The same feedback path in each of the four forms, with every term in every unit.

The formulas are those of the interface, section 4, rearranged so that nothing is lost where numbers nearly
cancel: Kd = Kc'·(Ti'−Tf)·(Td'−Tf)/Ti' of a series controller is a product, not Kc'·Td' − Kp·Tf. A controller
goes from one form to another by the shortest way, never through a form that cannot hold it.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from typing import Any, Literal

from service.analysis.controller import (
    Controller,
    IdealController,
    ParallelController,
    Scan,
    SeriesController,
    TwoZerosController,
    as_complex,
)
from service.analysis.form_terms import FormTerms, IdealForm, ParallelForm, SeriesForm, ZerosForm
from service.analysis.results import EquivalentGains, EquivalentTerms, TermValue
from service.analysis.terms import (
    controller_gain,
    derivative_s,
    filter_time_s,
    integral_gain_per_s,
    integral_time_s,
    quadratic_roots,
    weights,
)

Form = Literal["ideal", "series", "parallel", "two_zeros"]

SETPOINT_DIFFERS = "the feedback path is the same; with the same set-point weights the set-point path differs"
FILTER_UNKNOWN = "the derivative filter is not known and is taken as absent"
OUT_OF_RANGE = "a term is too large or too small to be told"

_SAME = 1e-12
"""Set-point paths are the same where their coefficients agree to this share of the feedback path's."""

_NEARLY_EQUAL = 1e-9
"""Closer than this the difference of two float64 numbers has lost more than half of its digits."""


class NoEquivalentError(ValueError):
    """The form cannot hold this controller; the message says why."""


def equivalent_gains(controller: Controller) -> tuple[EquivalentGains, ...]:
    """The controller in the ideal, series and parallel form and with two zeros, in this order.

    The filter time stays the same throughout. An entry without a controller says in `reason` why the form has
    none; one with a controller says there whether the set-point path differs.
    """
    # a filter may stand on the display of a controller whose derivative gain is 0
    absent = isinstance(controller, ParallelController) and derivative_s(controller) == 0
    tf = 0.0 if absent else filter_time_s(controller)
    own = _CONVERSIONS[controller.form](controller, tf)
    return tuple(_entry(form, controller, own, tf) for form in _CONVERSIONS)


def _entry(form: Form, controller: Controller, own: FormTerms, tf: float) -> EquivalentGains:
    try:
        terms = own if form == controller.form else _CONVERSIONS[form](controller, tf)
        told = terms.told(tf, controller.scan if isinstance(controller.scan, Scan) else None)
    except NoEquivalentError as none:
        return EquivalentGains(form=form, controller=None, reason=str(none))
    except (OverflowError, ZeroDivisionError):
        return EquivalentGains(form=form, controller=None, reason=OUT_OF_RANGE)
    if not _in_range(told):
        return EquivalentGains(form=form, controller=None, reason=OUT_OF_RANGE)
    told = _as_entered(told, controller) if form == controller.form else told
    return EquivalentGains(form=form, controller=told, reason=_remark(terms, own, controller, tf))


def _ideal(controller: Controller, tf: float) -> IdealForm:
    if isinstance(controller, IdealController):
        gain = None if controller.proportional is None else controller_gain(controller.proportional)
        return IdealForm(gain, integral_time_s(controller.integral), derivative_s(controller))
    if isinstance(controller, SeriesController):
        return _ideal_of_series(_series_as_entered(controller), tf)
    terms = _parallel(controller, tf)
    if terms.kp == 0:
        return IdealForm(None, 1.0 / terms.ki if terms.ki else None, terms.kd)
    return IdealForm(terms.kp, terms.kp / terms.ki if terms.ki else None, terms.kd / terms.kp)


def _ideal_of_series(series: SeriesForm, tf: float) -> IdealForm:
    """Ti = Ti'+Td'−Tf, Kc = Kc'·Ti/Ti', Td = (Ti'−Tf)·(Td'−Tf)/Ti."""
    if series.ti_s is None or series.td_s == 0:
        return IdealForm(series.gain, series.ti_s, _parallel_of_series(series, tf).kd / series.gain)
    terms, ti = _parallel_of_series(series, tf), _sum_less_filter(series.ti_s, series.td_s, tf)
    if terms.kp == 0:
        return IdealForm(None, 1.0 / terms.ki, terms.kd)
    return IdealForm(terms.kp, ti, (series.ti_s - tf) * ((series.td_s - tf) / ti))


def _series(controller: Controller, tf: float) -> SeriesForm:
    if isinstance(controller, SeriesController):
        return _series_as_entered(controller)
    if isinstance(controller, TwoZerosController):
        return _series_of_zeros(controller)
    ideal = _ideal(controller, tf)
    if ideal.gain is None:
        raise NoEquivalentError("the series form always has a proportional term; this controller has none")
    if ideal.td_s == 0 or ideal.ti_s is None:
        return SeriesForm(ideal.gain, ideal.ti_s, ideal.td_s + tf)
    larger = _larger_series_time(ideal.ti_s, ideal.td_s, tf)
    if larger is None:
        raise NoEquivalentError("the zeros are complex: (Ti−Tf)² is less than 4·Ti·Td")
    return SeriesForm(ideal.gain * (larger / ideal.ti_s), larger, ideal.ti_s * ((ideal.td_s + tf) / larger))


def _series_of_zeros(controller: TwoZerosController) -> SeriesForm:
    """Ti' = −1/z1 of the zero nearer to the origin, Td' = −1/z2, Kc' = −k·z2."""
    zeros = _zeros_left_of_axis(controller)
    if any(zero.imag != 0 for zero in zeros):
        raise NoEquivalentError("the zeros are complex")
    rates = sorted(-zero.real for zero in zeros)
    if len(rates) == 1:
        return SeriesForm(controller.gain, 1.0 / rates[0], 0.0)
    return SeriesForm(controller.gain * rates[1], 1.0 / rates[0], 1.0 / rates[1])


def _parallel(controller: Controller, tf: float) -> ParallelForm:
    match controller:
        case ParallelController():
            ki = integral_gain_per_s(controller.integral, controller.scan)
            return ParallelForm(controller_gain(controller.proportional), ki, derivative_s(controller))
        case IdealController():
            ideal = _ideal(controller, tf)
            factor = 1.0 if ideal.gain is None else ideal.gain
            return ParallelForm(
                ideal.gain or 0.0, factor / ideal.ti_s if ideal.ti_s else 0.0, factor * ideal.td_s
            )
        case SeriesController():
            return _parallel_of_series(_series_as_entered(controller), tf)
        case TwoZerosController():
            return _parallel_of_zeros(controller, tf)


def _parallel_of_series(series: SeriesForm, tf: float) -> ParallelForm:
    """Kp = Kc'·(Ti'+Td'−Tf)/Ti', Ki = Kc'/Ti', Kd = Kc'·(Ti'−Tf)·(Td'−Tf)/Ti'."""
    gain, ti, td = series.gain, series.ti_s, series.td_s
    lead = td - tf if td else 0.0
    if ti is None:
        return ParallelForm(gain, 0.0, gain * _not_negative(lead, "derivative"))
    if td == 0:
        return ParallelForm(gain, gain / ti, 0.0)
    kp = gain * (_not_negative(_sum_less_filter(ti, td, tf), "proportional") / ti)
    return ParallelForm(kp, gain / ti, gain * _not_negative((ti - tf) * (lead / ti), "derivative"))


def _parallel_of_zeros(controller: TwoZerosController, tf: float) -> ParallelForm:
    """Ki = k·z1·z2, Kp = −k·(z1 + z2 + z1·z2·Tf), Kd = k·(1+z1·Tf)·(1+z2·Tf)."""
    k, zeros = controller.gain, [as_complex(zero) for zero in controller.zeros_rad_s]
    _not_at_origin(zeros)
    if len(zeros) == 1:
        return ParallelForm(k, k * _not_negative(-zeros[0].real, "integral"), 0.0)
    first, second = zeros
    ki = _not_negative(k * (first * second).real, "integral")
    kp = _not_negative(-k * (first + second * (1.0 + first * tf)).real, "proportional")
    kd = _not_negative(k * ((1.0 + first * tf) * (1.0 + second * tf)).real, "derivative")
    return ParallelForm(kp, ki, kd)


def _two_zeros(controller: Controller, tf: float) -> ZerosForm:
    """k = Kc·(Td+Tf), zeros the roots of Ti·(Td+Tf)·s² + (Ti+Tf)·s + 1."""
    if isinstance(controller, TwoZerosController):
        return ZerosForm(controller.gain, tuple(as_complex(zero) for zero in controller.zeros_rad_s))
    if isinstance(controller, SeriesController):
        return _zeros_of_series(_series_as_entered(controller))
    ideal = _ideal(controller, tf)
    if ideal.ti_s is None:
        raise NoEquivalentError(
            "the form with two zeros always has integral action; this controller has none"
        )
    if ideal.gain is None:
        return _zeros_without_proportional(ideal.ti_s, ideal.td_s, tf)
    larger = _larger_series_time(ideal.ti_s, ideal.td_s, tf)
    if ideal.td_s == 0 or larger is not None:
        return _zeros_of_series(_series(controller, tf))
    lead = ideal.td_s + tf
    real, product = -0.5 * (ideal.ti_s + tf) / (ideal.ti_s * lead), 1.0 / (ideal.ti_s * lead)
    zero = complex(
        real, math.sqrt(-_relative_discriminant(ideal.ti_s, ideal.td_s, tf)) * 0.5 * ideal.ti_s * product
    )
    return ZerosForm(ideal.gain * lead, (zero, zero.conjugate()))


def _zeros_of_series(series: SeriesForm) -> ZerosForm:
    if series.ti_s is None:
        raise NoEquivalentError(
            "the form with two zeros always has integral action; this controller has none"
        )
    if series.td_s == 0:
        return ZerosForm(series.gain, (complex(-1.0 / series.ti_s),))
    return ZerosForm(series.gain * series.td_s, (complex(-1.0 / series.ti_s), complex(-1.0 / series.td_s)))


def _zeros_without_proportional(ti: float, td: float, tf: float) -> ZerosForm:
    """1/(Ti·s) + Td·s/(1+Tf·s)."""
    if td == 0:
        raise NoEquivalentError("integral action alone has no zero")
    return ZerosForm(td, quadratic_roots(td, tf / ti, 1.0 / ti))


def _series_as_entered(controller: SeriesController) -> SeriesForm:
    gain = controller_gain(controller.proportional)
    return SeriesForm(gain, integral_time_s(controller.integral), derivative_s(controller))


def _relative_discriminant(ti: float, td: float, tf: float) -> float:
    """((Ti−Tf)² − 4·Ti·Td)/Ti²; where it is nearly 0 by exact arithmetic, since its sign decides a form."""
    apart, product = abs(ti - tf) / ti, 2.0 * math.sqrt(td / ti)
    if abs(apart - product) > _NEARLY_EQUAL * product:
        return (apart - product) * (apart + product)
    exact_ti = Fraction(ti)
    return float(((exact_ti - Fraction(tf)) ** 2 - 4 * exact_ti * Fraction(td)) / exact_ti**2)


def _larger_series_time(ti: float, td: float, tf: float) -> float | None:
    """The larger root of x² − (Ti+Tf)·x + Ti·(Td+Tf); None where the roots are complex."""
    discriminant = _relative_discriminant(ti, td, tf)
    return None if discriminant < 0 else 0.5 * (ti + tf + ti * math.sqrt(discriminant))


def _sum_less_filter(ti: float, td: float, tf: float) -> float:
    """Ti' + Td' − Tf, the smaller time and the filter first."""
    return ti + (td - tf) if td <= ti else td + (ti - tf)


def _zeros_left_of_axis(controller: TwoZerosController) -> list[complex]:
    zeros = [as_complex(zero) for zero in controller.zeros_rad_s]
    _not_at_origin(zeros)
    if any(zero.real > 0 for zero in zeros):
        raise NoEquivalentError("a zero right of the axis needs a negative term")
    return zeros


def _not_at_origin(zeros: list[complex]) -> None:
    if any(zero == 0 for zero in zeros):
        raise NoEquivalentError(
            "a zero at the origin hides the integral action, which no other form can hold"
        )


def _not_negative(value: float, term: str) -> float:
    if value < 0:
        raise NoEquivalentError(f"the {term} term would be negative")
    return value


def _in_range(told: EquivalentTerms) -> bool:
    terms = (*told.proportional, *told.integral, *told.derivative, *told.derivative_filter)
    parts = [part for zero in told.zeros_rad_s for part in (zero if isinstance(zero, tuple) else (zero,))]
    values = [*(term.value for term in terms), 1.0 if told.gain is None else told.gain]
    return all(0 < value < math.inf for value in values) and all(map(math.isfinite, parts))


def _as_entered(told: EquivalentTerms, controller: Controller) -> EquivalentTerms:
    """The controller's own form, with each entered number in its own unit to the bit."""
    derivative_filter = _with_entered(told.derivative_filter, controller.derivative_filter)
    if isinstance(controller, TwoZerosController):
        return replace(told, derivative_filter=derivative_filter, zeros_rad_s=controller.zeros_rad_s)
    return replace(
        told,
        proportional=_with_entered(told.proportional, controller.proportional),
        integral=_with_entered(told.integral, controller.integral),
        derivative=_with_entered(told.derivative, controller.derivative),
        derivative_filter=derivative_filter,
    )


def _with_entered(told: tuple[TermValue, ...], entered: Any) -> tuple[TermValue, ...]:
    if entered is None or entered == "unknown":
        return told
    unit, value = entered.unit, entered.value
    return tuple(TermValue(value=value, unit=unit) if term.unit == unit else term for term in told)


def _remark(terms: FormTerms, own: FormTerms, controller: Controller, tf: float) -> str | None:
    """What a user of this entry has to know beside its numbers."""
    remarks = [SETPOINT_DIFFERS] if terms is not own and _setpoint_differs(terms, own, controller, tf) else []
    if controller.derivative_filter == "unknown":
        remarks.append(FILTER_UNKNOWN)
    return "; ".join(remarks) or None


def _setpoint_differs(terms: FormTerms, own: FormTerms, controller: Controller, tf: float) -> bool:
    weight = weights(controller)
    here = terms.numerator(tf, weight.proportional, weight.derivative)
    there = own.numerator(tf, weight.proportional, weight.derivative)
    scale = own.numerator(tf, 1.0, 1.0)
    return any(abs(a - b) > _SAME * abs(c) for a, b, c in zip(here, there, scale, strict=True))


_CONVERSIONS: dict[Form, Callable[[Controller, float], FormTerms]] = {
    "ideal": _ideal,
    "series": _series,
    "parallel": _parallel,
    "two_zeros": _two_zeros,
}
