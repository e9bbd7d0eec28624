"""Equivalent gains: the same feedback path, whatever the form and the unit."""

from __future__ import annotations

import itertools
import math
import timeit
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.analysis.controller import (
    Controller,
    DerivativeFilter,
    DerivativeTime,
    IdealController,
    IntegralTime,
    ParallelController,
    Proportional,
    Scan,
    SeriesController,
    SetpointWeight,
    TwoZerosController,
)
from service.analysis.equivalents import FILTER_UNKNOWN, SETPOINT_DIFFERS, equivalent_gains
from service.analysis.results import EquivalentGains, EquivalentTerms
from tests.analysis import entered
from tests.analysis.entered import parallel, series, two_zeros

FORMS = ("ideal", "series", "parallel", "two_zeros")
FREQUENCIES_RAD_S = (1e-3, 0.02, 0.3, 1.0, 7.0, 90.0, 1e4)


def ideal(
    kc: float = 2.0,
    ti: float | None = 40.0,
    td: float | None = 3.0,
    ratio: float | None = 10.0,
    **more: Any,
) -> IdealController:
    """The ideal form with its filter told as a ratio."""
    told = entered.ideal(kc, ti, td, **more)
    return (
        replace(told, derivative_filter=DerivativeFilter(value=ratio, unit="ratio")) if td and ratio else told
    )


def by_form(controller: Controller) -> dict[str, EquivalentGains]:
    return {entry.form: entry for entry in equivalent_gains(controller)}


def terms_of(controller: Controller, form: str) -> EquivalentTerms:
    entry = by_form(controller)[form]
    assert entry.controller is not None, entry.reason
    return entry.controller


def in_unit(terms: tuple[Any, ...], unit: str) -> float:
    return next(term.value for term in terms if term.unit == unit)


IN_SECONDS = {
    "seconds": lambda value: value,
    "minutes": lambda value: 60.0 * value,
    "repeats_per_second": lambda value: 1.0 / value,
    "repeats_per_minute": lambda value: 60.0 / value,
}
GAIN = {"gain": lambda value: value, "percent_band": lambda value: 100.0 / value}
KI_PER_S = {
    "gain_per_second": lambda value, h: value,
    "gain_per_minute": lambda value, h: value / 60.0,
    "seconds": lambda value, h: 1.0 / value,
    "minutes": lambda value, h: 1.0 / (60.0 * value),
    "gain_per_scan": lambda value, h: value / h,
}
KD_S = {
    "gain_seconds": lambda value, h: value,
    "gain_minutes": lambda value, h: 60.0 * value,
    "gain_scans": lambda value, h: value * h,
}


def readings(entry: EquivalentGains, scan_s: float | None) -> Any:
    """C(s), written down from the interface, for every combination of the units that the entry is told in."""
    terms = entry.controller
    assert terms is not None
    if entry.form == "two_zeros":
        tf = in_unit(terms.derivative_filter, "seconds") if terms.derivative_filter else 0.0
        zeros = [complex(*zero) if isinstance(zero, tuple) else zero for zero in terms.zeros_rad_s]
        yield lambda s: terms.gain * math.prod(s - zero for zero in zeros) / (s * (1.0 + tf * s))
        return
    optional = [group or (None,) for group in (terms.proportional, terms.integral, terms.derivative)]
    for p, i, d, f in itertools.product(*optional, terms.derivative_filter or (None,)):
        yield {"ideal": read_ideal, "series": read_series, "parallel": read_parallel}[entry.form](
            p, i, d, f, scan_s
        )


def read_ideal(p: Any, i: Any, d: Any, f: Any, scan_s: float | None) -> Any:
    kp, factor = (GAIN[p.unit](p.value),) * 2 if p else (0.0, 1.0)
    td = IN_SECONDS[d.unit](d.value) if d else 0.0
    tf = read_filter(f, td)
    return lambda s: (
        kp + factor * ((1.0 / (IN_SECONDS[i.unit](i.value) * s) if i else 0.0) + td * s / (1.0 + tf * s))
    )


def read_series(p: Any, i: Any, d: Any, f: Any, scan_s: float | None) -> Any:
    kc, td = GAIN[p.unit](p.value), IN_SECONDS[d.unit](d.value) if d else 0.0
    tf = read_filter(f, td)
    return lambda s: (
        kc * (1.0 + (1.0 / (IN_SECONDS[i.unit](i.value) * s) if i else 0.0)) * (1.0 + td * s) / (1.0 + tf * s)
    )


def read_parallel(p: Any, i: Any, d: Any, f: Any, scan_s: float | None) -> Any:
    kp = GAIN[p.unit](p.value) if p else 0.0
    ki = KI_PER_S[i.unit](i.value, scan_s) if i else 0.0
    kd = KD_S[d.unit](d.value, scan_s) if d else 0.0
    tf = read_filter(f, kd / kp if kp else 0.0)
    return lambda s: kp + ki / s + kd * s / (1.0 + tf * s)


def read_filter(f: Any, td: float) -> float:
    if f is None:
        return 0.0
    return td / f.value if f.unit == "ratio" else IN_SECONDS[f.unit](f.value)


def assert_same_feedback(controller: Controller, tolerance: float) -> None:
    """Every entry, read in every unit, is the controller's own entry."""
    entries = by_form(controller)
    scan_s = controller.scan.interval_s if isinstance(controller.scan, Scan) else None
    own = next(iter(readings(entries[controller.form], scan_s)))
    for entry in entries.values():
        for other in readings(entry, scan_s) if entry.controller else ():
            for rad_s in FREQUENCIES_RAD_S:
                assert other(1j * rad_s) == pytest.approx(own(1j * rad_s), rel=tolerance, abs=0.0), entry.form


SAMPLES = [
    ideal(),
    ideal(td=None),
    ideal(ti=None),
    ideal(ti=None, td=None),
    ideal(ti=5.0, td=3.0),
    ideal(ratio=None),
    IdealController(
        form="ideal", action="direct", integral=IntegralTime(value=3.0, unit="repeats_per_minute")
    ),
    series(1.3, 2.0, 1.2, 0.1),
    series(1.3, 2.0, 2.0),
    series(1.3, 2.0, None),
    series(1.3, None, 1.2, 0.2),
    series(1.3, 2.0, 1.2, 1.6),
    parallel(2.0, 0.1, 12.0, 0.4, scan=Scan(interval_s=0.25)),
    parallel(0.0, 0.1, 12.0, 0.4),
    parallel(2.0, 0.1, 0.0, 0.4),
    parallel(2.0, 0.0, 12.0),
    two_zeros(3.0, (-0.5, -0.04), 0.1),
    two_zeros(3.0, ((-0.5, 0.7), (-0.5, -0.7)), 0.1),
    two_zeros(3.0, (-0.5,)),
    two_zeros(3.0, (0.5, -0.04)),
]


@pytest.mark.parametrize("controller", SAMPLES, ids=lambda c: c.form)
def test_every_form_and_unit_is_the_same_feedback_path(controller: Controller) -> None:
    assert_same_feedback(controller, 1e-13)


times_s = st.floats(1e-3, 1e3)
gains = st.floats(1e-3, 1e3)


@given(kc=gains, ti=times_s, td=times_s, ratio=st.floats(0.5, 50.0))
def test_an_ideal_controller_is_the_same_in_every_form(kc: float, ti: float, td: float, ratio: float) -> None:
    assert_same_feedback(ideal(kc, ti, td, ratio), 1e-11)


@given(kc=gains, ti=times_s, td=times_s, tf=times_s)
def test_a_series_controller_is_the_same_in_every_form(kc: float, ti: float, td: float, tf: float) -> None:
    assert_same_feedback(series(kc, ti, td, tf), 1e-9)


@given(k=gains, first=times_s, second=times_s, tf=times_s)
def test_two_zeros_are_the_same_in_every_form(k: float, first: float, second: float, tf: float) -> None:
    assert_same_feedback(two_zeros(k, (-1.0 / first, -1.0 / second), tf), 1e-9)


@given(kc=gains, ti=times_s, share=st.floats(0.01, 0.99), tf_share=st.just(0.0) | st.floats(1e-6, 0.99))
def test_to_the_series_form_and_back_changes_nothing(
    kc: float, ti: float, share: float, tf_share: float
) -> None:
    td_series, tf = share * ti, tf_share * share * ti
    told = terms_of(series(kc, ti, td_series, tf or None), "ideal")
    back = terms_of(
        IdealController(
            form="ideal",
            action="reverse",
            proportional=Proportional(value=in_unit(told.proportional, "gain"), unit="gain"),
            integral=IntegralTime(value=in_unit(told.integral, "seconds"), unit="seconds"),
            derivative=DerivativeTime(value=in_unit(told.derivative, "seconds"), unit="seconds"),
            derivative_filter=DerivativeFilter(value=tf, unit="seconds") if tf else None,
        ),
        "series",
    )
    # two times that lie close together are roots of a nearly square polynomial: digits go with the gap
    tolerance = 1e-13 / (1.0 - share) ** 2
    assert in_unit(back.proportional, "gain") == pytest.approx(kc, rel=tolerance)
    assert in_unit(back.integral, "seconds") == pytest.approx(ti, rel=tolerance)
    assert in_unit(back.derivative, "seconds") == pytest.approx(td_series, rel=tolerance)


def test_the_series_form_exists_up_to_its_limit_and_not_beyond() -> None:
    assert by_form(ideal(ti=12.0, td=3.0, ratio=None))["series"].controller is not None
    beyond = by_form(ideal(ti=math.nextafter(12.0, 0.0), td=3.0, ratio=None))["series"]
    assert beyond.controller is None
    assert beyond.reason == "the zeros are complex: (Ti−Tf)² is less than 4·Ti·Td"


def test_the_limit_of_the_series_form_counts_the_filter() -> None:
    # (16−4)² = 144 = 4·16·2.25, all exact in binary
    assert by_form(ideal(ti=16.0, td=2.25, ratio=2.25 / 4.0))["series"].controller is not None
    assert (
        by_form(ideal(ti=16.0, td=math.nextafter(2.25, 3.0), ratio=2.25 / 4.0))["series"].controller is None
    )


def test_the_larger_of_the_two_series_times_is_the_integral_time() -> None:
    told = terms_of(ideal(2.0, 3.0, 0.5, None), "series")
    assert in_unit(told.integral, "seconds") > in_unit(told.derivative, "seconds")


def test_a_series_filter_between_the_two_times_leaves_no_ideal_form() -> None:
    entries = by_form(series(1.3, 2.0, 1.2, 1.6))
    assert entries["ideal"].reason == entries["parallel"].reason == "the derivative term would be negative"
    assert entries["two_zeros"].controller is not None


def test_nearly_equal_times_and_filter_keep_their_digits() -> None:
    # Kd = Kc'·(Ti'−Tf)·(Td'−Tf)/Ti'; the difference Kc'·Td' − Kp·Tf would keep three digits of it
    told = terms_of(series(1.0, 2.0, 1.0 + 2.0**-40, 1.0), "parallel")
    assert in_unit(told.derivative, "gain_seconds") == pytest.approx(2.0**-41, rel=1e-12)


@pytest.mark.parametrize("controller", [ideal(ti=None), ideal(ti=None, td=None)])
def test_without_integral_action_there_is_no_form_with_two_zeros(controller: Controller) -> None:
    entry = by_form(controller)["two_zeros"]
    assert entry.controller is None
    assert "integral" in (entry.reason or "")


def test_a_zero_right_of_the_axis_has_no_other_form() -> None:
    entries = by_form(two_zeros(3.0, (0.5, -0.04)))
    assert [form for form in FORMS if entries[form].controller] == ["two_zeros"]


def test_a_zero_at_the_origin_has_no_other_form() -> None:
    entries = by_form(two_zeros(3.0, (0.0, -0.04)))
    assert [form for form in FORMS if entries[form].controller] == ["two_zeros"]
    assert "hides the integral action" in (entries["series"].reason or "")


def test_integral_action_alone_has_neither_series_form_nor_zeros() -> None:
    only = IdealController(form="ideal", action="reverse", integral=IntegralTime(value=20.0, unit="seconds"))
    entries = by_form(only)
    assert [form for form in FORMS if entries[form].controller] == ["ideal", "parallel"]


def test_units_of_a_scan_are_told_only_where_there_is_a_scan() -> None:
    def units(controller: Controller) -> set[str]:
        told = terms_of(controller, "parallel")
        return {term.unit for term in (*told.integral, *told.derivative)}

    assert {"gain_per_scan", "gain_scans"} <= units(parallel(2.0, 0.1, 12.0, scan=Scan(interval_s=0.25)))
    assert not {"gain_per_scan", "gain_scans"} & units(parallel(2.0, 0.1, 12.0))
    assert not {"gain_per_scan", "gain_scans"} & units(parallel(2.0, 0.1, 12.0, scan="unknown"))


def test_a_number_in_the_unit_it_was_entered_in_keeps_its_bits() -> None:
    entered = IdealController(
        form="ideal",
        action="reverse",
        proportional=Proportional(value=33.3, unit="percent_band"),
        integral=IntegralTime(value=0.7, unit="repeats_per_minute"),
        derivative=DerivativeTime(value=0.1, unit="minutes"),
        derivative_filter=DerivativeFilter(value=7.0, unit="ratio"),
    )
    told = terms_of(entered, "ideal")
    assert in_unit(told.proportional, "percent_band") == 33.3
    assert in_unit(told.integral, "repeats_per_minute") == 0.7
    assert in_unit(told.derivative, "minutes") == 0.1
    assert in_unit(told.derivative_filter, "ratio") == 7.0


def test_an_unknown_filter_is_said_in_every_entry() -> None:
    entries = equivalent_gains(ideal(ratio=None, td=1.0, ti=9.0))
    assert not any(entry.reason and FILTER_UNKNOWN in entry.reason for entry in entries)
    unknown = IdealController(
        form="ideal",
        action="reverse",
        proportional=Proportional(value=2.0, unit="gain"),
        derivative=DerivativeTime(value=1.0, unit="seconds"),
        integral=IntegralTime(value=9.0, unit="seconds"),
        derivative_filter="unknown",
    )
    assert all(FILTER_UNKNOWN in (entry.reason or "") for entry in equivalent_gains(unknown))


def setpoint_path(controller: Controller, s: complex) -> complex:
    """The set-point path as the interface writes it down, in the controller's own form."""
    weight = controller.setpoint_weight
    assert isinstance(weight, SetpointWeight)
    b, c = weight.proportional, weight.derivative
    match controller:
        case SeriesController():
            kc, ti = controller.proportional.value, controller.integral.value
            td = controller.derivative.value if controller.derivative else 0.0
            tf = controller.derivative_filter.value if controller.derivative_filter else 0.0
            return kc * (b + 1.0 / (ti * s)) * (1.0 + c * ((td - tf) * s / (1.0 + tf * s) if td else 0.0))
        case ParallelController():
            tf = controller.derivative_filter.value if controller.derivative_filter else 0.0
            kp, ki, kd = (
                term.value for term in (controller.proportional, controller.integral, controller.derivative)
            )
            return b * kp + ki / s + c * kd * s / (1.0 + tf * s)
        case TwoZerosController():
            k, (z1, z2) = controller.gain, controller.zeros_rad_s
            tf = controller.derivative_filter.value if controller.derivative_filter else 0.0
            return (-b * k * (z1 + z2) * s + k * z1 * z2 + c * k * s * s) / (s * (1.0 + tf * s))
    raise TypeError(controller)


WEIGHTS = [(1.0, 0.0), (1.0, 1.0), (0.0, 0.0), (0.6, 0.0), (0.6, 0.6), (0.0, 1.0)]


@pytest.mark.parametrize("weights", WEIGHTS)
@pytest.mark.parametrize("tf", [None, 0.1])
@pytest.mark.parametrize("form", FORMS)
def test_the_remark_says_exactly_where_the_setpoint_path_differs(
    form: str, tf: float | None, weights: tuple[float, float]
) -> None:
    weight = SetpointWeight(proportional=weights[0], derivative=weights[1])
    source = {
        "series": series(1.3, 4.0, 1.2, tf, setpoint_weight=weight),
        "parallel": parallel(2.0, 0.1, 3.0, tf, setpoint_weight=weight),
        "ideal": ideal(2.0, 20.0, 1.5, tf and 1.5 / tf, setpoint_weight=weight),
        "two_zeros": two_zeros(3.0, (-0.9, -0.04), tf, setpoint_weight=weight),
    }[form]
    entries = by_form(source)
    paths = {
        name: setpoint_path(entered_as(entries[name], weight), 0.7j)
        for name in ("series", "parallel", "two_zeros")
    }
    paths["ideal"] = paths["parallel"]  # the two weigh the same terms
    for name in FORMS:
        differs = abs(paths[name] - paths[form]) > 1e-9
        assert (SETPOINT_DIFFERS in (entries[name].reason or "")) == differs, name


def entered_as(entry: EquivalentGains, weight: SetpointWeight) -> Controller:
    """The controller that someone would enter from an entry, with the same weights."""
    told = entry.controller
    assert told is not None
    tf = in_unit(told.derivative_filter, "seconds") if told.derivative_filter else None
    if entry.form == "two_zeros":
        return two_zeros(told.gain or 0.0, told.zeros_rad_s, tf, setpoint_weight=weight)
    gain = in_unit(told.proportional, "gain")
    if entry.form == "series":
        ti, td = in_unit(told.integral, "seconds"), in_unit(told.derivative, "seconds")
        return series(gain, ti, td, tf, setpoint_weight=weight)
    ki, kd = in_unit(told.integral, "gain_per_second"), in_unit(told.derivative, "gain_seconds")
    return parallel(gain, ki, kd, tf, setpoint_weight=weight)


def test_a_term_beyond_float64_is_said_and_never_told_as_infinite() -> None:
    entries = by_form(parallel(1e300, 1e-300, 0.0))
    assert entries["ideal"].controller is None
    assert entries["ideal"].reason == "a term is too large or too small to be told"


def test_equivalents_take_no_time_that_anyone_would_notice() -> None:
    controller = ideal()
    # some 40 µs; the bound only catches a change of the method
    assert min(timeit.repeat(lambda: equivalent_gains(controller), number=100, repeat=5)) / 100 < 1e-3
