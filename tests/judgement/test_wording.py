"""Every name that people meet has its words."""

from __future__ import annotations

from dataclasses import fields
from typing import Any, get_args, get_type_hints

import pytest

from service.analysis import controller, plant
from service.analysis.results import Quantity
from service.judgement import wording
from service.judgement.criteria import Criteria, CriterionFinding, quantity_name
from service.judgement.quantities import QUANTITIES

TERMS = [
    controller.Proportional,
    controller.IntegralTime,
    controller.IntegralGain,
    controller.DerivativeTime,
    controller.DerivativeGain,
    controller.DerivativeFilter,
    controller.FilterTime,
]


def literals(holder: type, field: str) -> tuple[Any, ...]:
    return get_args(get_type_hints(holder)[field])


@pytest.mark.parametrize("term", TERMS, ids=lambda term: term.__name__)
def test_every_unit_has_words(term: type) -> None:
    assert set(literals(term, "unit")) <= set(wording.UNITS)


def test_every_form_has_words() -> None:
    forms = {literals(form, "form")[0] for form in get_args(controller.Controller)}
    assert forms == set(wording.FORMS)


def test_every_kind_of_plant_has_words() -> None:
    kinds = {literals(kind, "kind")[0] for kind in get_args(plant.PlantModel)}
    assert kinds == set(wording.PLANT_KINDS)


def test_the_action_is_told_by_what_the_output_does() -> None:
    # interface, section 2: reverse, the output falls when PV rises
    assert wording.ACTIONS["reverse"].endswith("PV up → output down")
    assert wording.ACTIONS["direct"].endswith("PV up → output up")


@pytest.mark.parametrize("criterion", [field.name for field in fields(Criteria)])
def test_every_criterion_is_told_with_its_bound(criterion: str) -> None:
    bound = "at least 2" if criterion.endswith("_min") else "at most 2"
    assert wording.criterion_words(criterion, 2.0).startswith(
        f"{wording.quantity_label(quantity_name(criterion))} {bound}"
    )


@pytest.mark.parametrize(
    ("name", "value", "told"),
    [
        ("phase_margin_deg", 44.123, "44.1°"),
        ("settling_time_s", 12.34, "12.3 s"),
        ("overshoot_percent", 8.0, "8.00 %"),
        ("gain_margin", 3.1, "3.10"),
        ("gain_margin", "unbounded", "without limit"),
        ("phase_margin_deg", None, "not defined"),
    ],
)
def test_a_quantity_is_told_with_its_unit(name: str, value: Quantity, told: str) -> None:
    assert wording.told(name, value) == told


def test_the_unit_in_a_quantitys_name_is_the_one_it_is_told_in() -> None:
    units = {"_deg": "°", "_percent": "%", "_rad_s": "rad/s", "_per_s": "1/s", "_s": "s"}
    for name in QUANTITIES:
        ending = next((unit for unit in units if name.endswith(unit)), None)
        assert wording.quantity_unit(name) == (units[ending] if ending else "")


def test_a_value_just_past_its_limit_does_not_read_as_if_it_met_it() -> None:
    finding = CriterionFinding(
        criterion="gain_margin_min", limit=2.0, value=1.9996, outcome="not_met", analysis="continuous"
    )
    assert wording.criterion_sentence(finding) == "Gain margin at least 2: 1.9996, not met."
