"""Which changes of a loop take a second person, field by field."""

from __future__ import annotations

from typing import Any

import pytest

from service.records import protection
from tests.records.store import WIDER, registration

INNER = {"site": "North", "tag": "FIC-9"}
LIMITS = {"gain_margin_min": 2.5, "max_sensitivity_max": 1.8}


@pytest.mark.parametrize(
    ("before", "after", "fields"),
    [
        ({}, {}, []),
        ({}, {"pv": WIDER}, ["pv"]),
        ({}, {"output": WIDER}, ["output"]),
        ({"fail_position": "open"}, {}, ["fail_position"]),
        ({}, {"inner_loop": INNER}, ["inner_loop"]),
        ({"inner_loop": INNER}, {"inner_loop": INNER}, []),
        ({"safety_related": True}, {}, ["safety_related"]),
        ({"safety_related": True}, {"safety_related": True}, []),
        ({}, {"safety_related": True}, []),
        ({"criteria": LIMITS}, {"criteria": LIMITS}, []),
        ({"criteria": LIMITS}, {"criteria": {}}, ["criteria", "criteria"]),
        (
            {"criteria": LIMITS},
            {"pv": WIDER, "criteria": LIMITS | {"gain_margin_min": 2.4}},
            ["pv", "criteria"],
        ),
    ],
)
def test_each_field_that_an_approval_rests_on_is_named(
    before: dict[str, Any], after: dict[str, Any], fields: list[str]
) -> None:
    found = protection.protected(registration(**before), registration(**after))
    assert [reason.field for reason in found] == fields


def test_what_retiring_takes_away_is_told_under_its_own_name() -> None:
    told = protection.retirement("high load")
    assert told.field == "retire_operating_point"
    assert "high load" in told.sentence
