"""Installations: as found, as left, in any form, and what differs."""

from __future__ import annotations

from datetime import timedelta
from typing import Any

import pytest

from service.records import queries
from service.records.errors import FieldErrors, NotFound, WrongStep
from service.records.views import LoopView, SubmissionView
from tests.records.store import Store, gains

AS_ENTERED = gains(
    2.0,
    integral={"value": 40.0, "unit": "seconds"},
    derivative={"value": 3.0, "unit": "seconds"},
    derivative_filter={"value": 10.0, "unit": "ratio"},
)
"""Ideal: Kc = 2, Ti = 40 s, Td = 3 s, Tf = 0.3 s."""

KC, TI, TD, TF = 2.0, 40.0, 3.0, 0.3

# the series equivalent: its two times are the roots of x² − (Ti+Tf)·x + Ti·(Td+Tf), as multiplying out both
# forms and comparing powers of s shows
_HALF = (TI + TF) / 2
_ROOT = (_HALF**2 - TI * (TD + TF)) ** 0.5
SERIES_TI, SERIES_TD = _HALF + _ROOT, _HALF - _ROOT
SERIES_KC = KC * SERIES_TI / TI

SAME: dict[str, dict[str, Any]] = {
    "as entered": AS_ENTERED,
    "percent band and repeats": AS_ENTERED
    | {
        "proportional": {"value": 50.0, "unit": "percent_band"},
        "integral": {"value": 1.5, "unit": "repeats_per_minute"},
        "derivative": {"value": 0.05, "unit": "minutes"},
        "derivative_filter": {"value": 0.3, "unit": "seconds"},
    },
    "parallel": AS_ENTERED
    | {
        "form": "parallel",
        "proportional": {"value": KC, "unit": "gain"},
        "integral": {"value": KC / TI, "unit": "gain_per_second"},
        "derivative": {"value": KC * TD, "unit": "gain_seconds"},
        "derivative_filter": {"value": TF, "unit": "seconds"},
    },
    "series": AS_ENTERED
    | {
        "form": "series",
        "proportional": {"value": SERIES_KC, "unit": "gain"},
        "integral": {"value": SERIES_TI, "unit": "seconds"},
        "derivative": {"value": SERIES_TD, "unit": "seconds"},
        "derivative_filter": {"value": TF, "unit": "seconds"},
        "setpoint_weight": {"proportional": 1.0, "derivative": 1.0},
    },
    "engineering units": AS_ENTERED
    | {
        # output span 100 %, PV span 40 m3/h: 100/40 per cent of output for a per cent of range
        "gain_basis": "engineering_units",
        "proportional": {"value": KC * 100.0 / 40.0, "unit": "gain"},
    },
}

OTHER: dict[str, tuple[dict[str, Any], str]] = {
    "gain": (AS_ENTERED | {"proportional": {"value": 2.0 * (1 + 1e-8), "unit": "gain"}}, "proportional"),
    "minutes for seconds": (AS_ENTERED | {"integral": {"value": 40.0, "unit": "minutes"}}, "integral"),
    "action": (AS_ENTERED | {"action": "direct"}, "action"),
    "filter": (AS_ENTERED | {"measurement_filter_s": 0.5}, "measurement_filter_s"),
    "filter unknown": (AS_ENTERED | {"measurement_filter_s": "unknown"}, "measurement_filter_s"),
    "no derivative filter": (AS_ENTERED | {"derivative_filter": None}, "derivative_filter"),
    "weight": (
        AS_ENTERED | {"setpoint_weight": {"proportional": 0.5, "derivative": 0.0}},
        "setpoint_proportional",
    ),
    "scan": (
        AS_ENTERED | {"scan": {"interval_s": 1.0, "method": "backward_difference", "output_delay_s": 0.0}},
        "scan.interval_s",
    ),
}


def _approved(store: Store, controller: dict[str, Any]) -> SubmissionView:
    submission = store.submit(controller=controller)
    store.approve(submission)
    return submission


# the same weights mean the same set-point path in both forms only where all terms see the whole set point
def _weights(name: str) -> dict[str, Any]:
    return {"setpoint_weight": {"proportional": 1.0, "derivative": 1.0}} if name == "series" else {}


@pytest.mark.parametrize("name", SAME)
def test_the_approved_gains_in_another_form_or_unit_are_the_approved_gains(
    store: Store, loop: LoopView, name: str
) -> None:
    submission = _approved(store, AS_ENTERED | _weights(name))
    view = store.install(submission, as_left=SAME[name])
    assert view.installation.differences == ()
    assert store.read(submission).state == "in_force"


@pytest.mark.parametrize("name", OTHER)
def test_other_gains_are_recorded_with_what_differs_and_the_state_stays(
    store: Store, loop: LoopView, name: str
) -> None:
    submission = _approved(store, AS_ENTERED)
    as_left, setting = OTHER[name]
    installation = store.install(submission, as_left=as_left).installation
    assert not installation.as_approved
    assert setting in [difference.setting for difference in installation.differences if difference.hinders]
    assert store.read(submission).state == "approved"
    assert store.events()[-1] == "gains_installed_otherwise"


def test_a_recorded_setting_that_differs_is_said_and_hinders_nothing(store: Store, loop: LoopView) -> None:
    limit = {"name": "output high limit", "value": 95.0, "unit": "%"}
    submission = _approved(store, gains(recorded_settings=[limit]))
    left = store.install(submission, as_left=gains(recorded_settings=[limit | {"value": 90.0}])).installation
    assert [(d.setting, d.recorded, d.found) for d in left.differences] == [
        ("recorded_settings.output high limit", 95.0, 90.0)
    ]
    assert store.read(submission).state == "in_force"


def test_after_other_gains_were_typed_the_approved_ones_still_come_into_force(
    store: Store, loop: LoopView
) -> None:
    submission = _approved(store, gains())
    store.install(submission, as_left=gains(15.0))
    store.install(submission, as_found=gains(15.0))
    view = store.read(submission)
    assert (view.state, [entry.installation.as_approved for entry in view.installations]) == (
        "in_force",
        [False, True],
    )


def test_gain_sets_are_in_force_when_the_last_of_them_is_typed_in(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="high load", gain=2.0)
    sets = [
        {"condition": "low", "operating_points": ["normal"], "controller": gains(1.5)},
        {"condition": "high", "operating_points": ["high load"], "controller": gains(0.7)},
    ]
    submission = store.submit(controller=None, gain_sets=sets)
    store.approve(submission)
    store.install(submission, as_left=gains(0.7))
    assert store.read(submission).state == "approved"
    store.install(submission, as_left=gains(1.5))
    assert store.read(submission).state == "in_force"


@pytest.fixture
def scheduled(store: Store, loop: LoopView) -> SubmissionView:
    """Approved gains for two conditions."""
    store.add_model(loop, operating_point="high load", gain=2.0)
    sets = [
        {"condition": "low", "operating_points": ["normal"], "controller": gains(1.5)},
        {"condition": "high", "operating_points": ["high load"], "controller": gains(0.7)},
    ]
    submission = store.submit(controller=None, gain_sets=sets)
    store.approve(submission)
    return submission


def _sets(**left: float) -> dict[str, Any]:
    """An installation of sets by their condition, each with the proportional gain that was left."""
    return {
        "as_found": None,
        "as_left": None,
        "gain_sets": [
            {"condition": condition, "as_found": gains(1.0), "as_left": gains(value)}
            for condition, value in left.items()
        ],
    }


def test_all_sets_of_a_schedule_are_recorded_in_one_installation(
    store: Store, scheduled: SubmissionView
) -> None:
    done = store.install(scheduled, **_sets(low=1.5, HIGH=0.7)).installation
    assert done.as_approved
    assert [(left.gain_set, left.as_approved) for left in done.sets_left()] == [(0, True), (1, True)]
    assert store.read(scheduled).state == "in_force"


def test_a_set_that_was_mistyped_is_told_by_its_condition(store: Store, scheduled: SubmissionView) -> None:
    done = store.install(scheduled, **_sets(low=1.5, high=7.0)).installation
    hindering = [(d.condition, d.setting, d.recorded, d.found) for d in done.differences if d.hinders]
    assert ("high", "proportional", 0.7, 7.0) in hindering
    assert {condition for condition, *_ in hindering} == {"high"}
    assert store.read(scheduled).state == "approved"
    store.install(scheduled, **_sets(high=0.7))
    assert store.read(scheduled).state == "in_force"


def test_a_set_counts_as_it_was_left_last(store: Store, scheduled: SubmissionView) -> None:
    store.install(scheduled, **_sets(low=1.5))
    store.install(scheduled, **_sets(low=1.6))
    store.install(scheduled, **_sets(high=0.7))
    assert store.read(scheduled).state == "approved"
    store.install(scheduled, **_sets(low=1.5))
    assert store.read(scheduled).state == "in_force"


def test_nobody_guesses_which_of_several_sets_was_mistyped(store: Store, scheduled: SubmissionView) -> None:
    with pytest.raises(FieldErrors, match="say in gain_sets") as refused:
        store.install(scheduled, as_left=gains(7.0))
    assert refused.value.errors[0].pointer == "/as_left"


@pytest.mark.parametrize("conditions", [("middle",), ("low", "LOW")])
def test_a_condition_that_is_none_of_those_approved_is_refused(
    store: Store, scheduled: SubmissionView, conditions: tuple[str, ...]
) -> None:
    with pytest.raises(FieldErrors) as refused:
        store.install(scheduled, **_sets(**dict.fromkeys(conditions, 1.5)))
    last = len(conditions) - 1
    assert [problem.pointer for problem in refused.value.errors] == [f"/gain_sets/{last}/condition"]


def test_as_found_is_held_against_the_set_of_the_same_condition(
    store: Store, scheduled: SubmissionView
) -> None:
    store.install(scheduled, **_sets(low=1.5, high=0.7))
    later = store.submit(
        controller=None,
        gain_sets=[
            {"condition": "low", "operating_points": ["normal"], "controller": gains(1.4)},
            {"condition": "high", "operating_points": ["high load"], "controller": gains(0.6)},
        ],
    )
    store.approve(later)
    # found in the high set is what is recorded of the low one
    found = _sets(low=1.4, high=0.6)
    found["gain_sets"][0]["as_found"] = gains(1.5)
    found["gain_sets"][1]["as_found"] = gains(1.5)
    done = store.install(later, **found).installation
    assert done.as_found_differences is not None
    told = {(d.condition, d.setting, d.recorded, d.found) for d in done.as_found_differences if d.hinders}
    assert ("high", "proportional", 0.7, 1.5) in told
    assert {condition for condition, *_ in told} == {"high"}


def test_as_found_is_held_against_what_was_recorded_to_be_in_force(store: Store, loop: LoopView) -> None:
    store.submit(kind="baseline", controller=gains(1.0))
    submission = _approved(store, gains())
    installation = store.install(submission, as_found=gains(1.2)).installation
    assert installation.as_found_differences is not None
    found = [(d.setting, d.recorded, d.found) for d in installation.as_found_differences if d.hinders]
    assert ("proportional", 1.0, 1.2) in found


def test_where_nothing_was_recorded_as_found_is_held_against_nothing(store: Store, loop: LoopView) -> None:
    installation = store.install(_approved(store, gains())).installation
    assert installation.as_found_differences is None


def test_an_installation_before_its_approval_is_recorded_and_says_so(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    typed_at = store.clock().isoformat()
    store.clock.forward(hours=2)
    store.approve(submission)
    assert store.install(submission, installed_at=typed_at).installation.before_approval


def test_what_was_installed_in_time_is_recorded_afterwards(store: Store, loop: LoopView) -> None:
    friday = store.clock() + timedelta(days=4)
    submission = store.submit(install_by=friday.isoformat())
    store.approve(submission)
    store.clock.forward(days=7)
    with pytest.raises(WrongStep, match="expired"):
        store.install(submission)
    store.install(submission, installed_at=(friday - timedelta(hours=1)).isoformat())
    assert store.read(submission).state == "in_force"


@pytest.mark.parametrize("by", [timedelta(hours=1), -timedelta(hours=1)])
def test_a_time_that_cannot_be_is_refused(store: Store, loop: LoopView, by: timedelta) -> None:
    submission = _approved(store, gains())
    with pytest.raises(FieldErrors) as refused:
        store.install(submission, installed_at=(store.clock() + by).isoformat())
    assert refused.value.errors[0].pointer == "/installed_at"


def test_outside_ones_areas_nothing_is_installed(store: Store, loop: LoopView) -> None:
    submission = _approved(store, gains())
    with pytest.raises(NotFound):
        store.install(submission, "outsider")


def test_the_gains_in_force_are_those_that_last_came_into_force(store: Store, loop: LoopView) -> None:
    def in_force() -> tuple[str, str] | None:
        with store.database.reading() as session:
            found = queries.gains_in_force(session, store.actor("reviewer"), loop.id, store.clock())
        return None if found is None else (found.submission_id, found.state)

    assert in_force() is None
    submission = _approved(store, gains())
    assert in_force() is None
    store.install(submission)
    assert in_force() == (submission.id, "in_force")
    # still in the controller, and nobody answers for it any more
    store.decide(submission, "revoke")
    assert in_force() == (submission.id, "revoked")
