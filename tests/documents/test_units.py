"""Every unit in which a term can be entered is read, and no other."""

from __future__ import annotations

from typing import Any

import pytest

from tests.documents.requests import REQUEST, accepted, changed, refused_at

SURROUNDINGS: dict[str, Any] = {
    "action": "reverse",
    "derivative_filter": {"value": 1.0, "unit": "seconds"},
    "scan": {"interval_s": 0.5},
}
TIME_TERMS: dict[str, Any] = {
    "proportional": {"value": 2.0, "unit": "gain"},
    "integral": {"value": 40.0, "unit": "seconds"},
    "derivative": {"value": 3.0, "unit": "seconds"},
}
PARALLEL_TERMS: dict[str, Any] = {
    "proportional": {"value": 2.0, "unit": "gain"},
    "integral": {"value": 0.05, "unit": "gain_per_second"},
    "derivative": {"value": 6.0, "unit": "gain_seconds"},
}
CONTROLLERS: dict[str, dict[str, Any]] = {
    "ideal": {"form": "ideal", **SURROUNDINGS, **TIME_TERMS},
    "series": {"form": "series", **SURROUNDINGS, **TIME_TERMS},
    "parallel": {"form": "parallel", **SURROUNDINGS, **PARALLEL_TERMS},
    "two_zeros": {"form": "two_zeros", **SURROUNDINGS, "gain": 2.0, "zeros_rad_s": [-0.1, -0.5]},
}

# interface, section 2: the units of each term of each form
TIMES = {"seconds", "minutes", "repeats_per_second", "repeats_per_minute"}
UNITS: dict[tuple[str, str], set[str]] = {
    ("ideal", "proportional"): {"gain", "percent_band"},
    ("ideal", "integral"): TIMES,
    ("ideal", "derivative"): {"seconds", "minutes"},
    ("ideal", "derivative_filter"): {"seconds", "minutes", "ratio"},
    ("series", "proportional"): {"gain", "percent_band"},
    ("series", "integral"): TIMES,
    ("series", "derivative"): {"seconds", "minutes"},
    ("series", "derivative_filter"): {"seconds", "minutes", "ratio"},
    ("parallel", "proportional"): {"gain", "percent_band"},
    ("parallel", "integral"): {"gain_per_second", "gain_per_minute", "seconds", "minutes", "gain_per_scan"},
    ("parallel", "derivative"): {"gain_seconds", "gain_minutes", "gain_scans"},
    ("parallel", "derivative_filter"): {"seconds", "minutes", "ratio"},
    ("two_zeros", "derivative_filter"): {"seconds", "minutes"},
}
ALL_UNITS = set().union(*UNITS.values())


def entered(form: str, term: str, unit: str) -> dict[str, Any]:
    request = changed("/controller", CONTROLLERS[form], REQUEST)
    request["controller"] = {**CONTROLLERS[form], term: {"value": 2.5, "unit": unit, "displayed": "2.50"}}
    return request


@pytest.mark.parametrize(
    ("form", "term", "unit"), [(*key, unit) for key, units in UNITS.items() for unit in sorted(units)]
)
def test_a_unit_of_the_term_is_read(form: str, term: str, unit: str) -> None:
    told = getattr(accepted(entered(form, term, unit)).controller, term)
    assert (told.value, told.unit, told.displayed) == (2.5, unit, "2.50")


@pytest.mark.parametrize(
    ("form", "term", "unit"),
    [(*key, unit) for key, units in UNITS.items() for unit in sorted(ALL_UNITS - units)],
)
def test_a_unit_of_another_term_is_refused(form: str, term: str, unit: str) -> None:
    assert refused_at(entered(form, term, unit)) == [f"/controller/{term}/unit"]


@pytest.mark.parametrize(("term", "unit"), [("integral", "gain_per_scan"), ("derivative", "gain_scans")])
def test_a_gain_for_each_scan_needs_a_scan(term: str, unit: str) -> None:
    request = entered("parallel", term, unit)
    request["controller"]["scan"] = None
    assert refused_at(request) == [f"/controller/{term}/unit"]
