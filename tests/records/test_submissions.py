"""What is submitted: kept whole, recomputed everywhere, with every field that cannot be accepted named."""

from __future__ import annotations

from datetime import timedelta

import pytest

from service.documents.loops import ModelVersion
from service.documents.reading import read
from service.records import loops, queries, submissions
from service.records.errors import BasisChanged, Conflict, FieldErrors, NotAllowed, NotFound
from service.records.views import LoopView
from tests.records.store import GAINS, Store, gains


def _pointers(refused: pytest.ExceptionInfo[FieldErrors]) -> list[str]:
    return [problem.pointer for problem in refused.value.errors]


def test_everything_that_is_signed_stands_in_the_content_by_value(store: Store, loop: LoopView) -> None:
    content = store.submit(claims={"gain_margin": 5.0}, tool={"name": "tuner", "version": "2.1"}).content
    assert (content.loop, content.loop_revision) == (loop.loop, 1)
    assert content.gain_sets[0].controller.proportional.displayed == "1.50"  # type: ignore[union-attr]
    assert (content.reason, content.safety_effect) == ("the level swings", "none")
    assert [model.model.operating_point for model in content.models] == ["normal"]
    assert content.recomputations[0].answer.verdict == "stable"
    assert content.recomputations[0].answer.claims[0].outcome == "differs"
    assert content.recomputations[0].criteria.gain_margin_min == 2.0
    assert content.gains_in_force is None


def test_the_gains_then_in_force_stand_in_the_content(store: Store, loop: LoopView) -> None:
    before = store.submit(kind="baseline", controller=gains(1.2))
    content = store.submit().content
    assert content.gains_in_force is not None
    assert content.gains_in_force.content_digest == before.content_digest
    assert content.gains_in_force.gain_sets[0].controller == before.content.gain_sets[0].controller


def test_float64_values_keep_their_bits(store: Store, loop: LoopView) -> None:
    value = 0.1 + 0.2
    submission = store.submit(controller=gains(value))
    kept = store.read(submission).content.gain_sets[0].controller
    assert kept.proportional.value.hex() == value.hex()  # type: ignore[union-attr]
    results = store.read(submission).content.recomputations[0].answer.continuous
    assert results == submission.content.recomputations[0].answer.continuous


def test_the_curves_are_kept_beside_the_content(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    with store.database.reading() as session:
        curves = queries.curves(session, store.actor("auditor"), submission.id)
    assert submission.content.recomputations[0].answer.curves is None
    assert curves[0].operating_point == "normal"
    assert curves[0].curves.setpoint is not None
    assert len(curves[0].curves.setpoint.time_s) > 10


def test_each_operating_point_in_force_is_recomputed_with_its_latest_model(
    store: Store, loop: LoopView
) -> None:
    store.add_model(loop, operating_point="high load", gain=2.0)
    store.add_model(loop, operating_point="Normal", gain=1.5)
    content = store.submit().content
    assert [model.version for model in content.models] == [3, 2]
    assert [model.model.operating_point for model in content.models] == ["Normal", "high load"]


def test_a_limit_is_judged_at_the_worst_operating_point(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="high load", gain=2.0)
    worst = {entry.finding.criterion: entry for entry in store.submit().content.criteria}
    assert worst["gain_margin_min"].operating_point == "high load"
    assert worst["gain_margin_min"].finding.value == pytest.approx(5.235987755982989 / 2, rel=1e-9)


@pytest.mark.parametrize("person", ["reviewer", "auditor", "administrator"])
def test_only_a_submitter_submits(store: Store, loop: LoopView, person: str) -> None:
    with pytest.raises(NotAllowed):
        store.submit(person)


def test_site_and_tag_are_found_without_regard_to_case(store: Store, loop: LoopView) -> None:
    assert store.submit(loop={"site": "NORTH", "tag": "fic-101"}).content.loop.tag == "FIC-101"


def test_a_loop_outside_ones_areas_is_not_there(store: Store, loop: LoopView) -> None:
    with pytest.raises(NotFound):
        store.submit("outsider")


def test_all_fields_that_cannot_be_accepted_are_named_at_once(store: Store, loop: LoopView) -> None:
    past = (store.clock() - timedelta(days=1)).isoformat()
    with pytest.raises(FieldErrors) as refused:
        store.submit(temporary_until=past, install_by=past, kind="return")
    assert _pointers(refused) == ["/temporary_until", "/install_by", "/controller"]


def test_an_account_that_does_not_exist_prepared_nothing(store: Store, loop: LoopView) -> None:
    with pytest.raises(FieldErrors) as refused:
        store.submit(prepared_by=["submitter", "nobody"])
    assert _pointers(refused) == ["/prepared_by/1"]


@pytest.mark.parametrize("kind", ["emergency", "baseline"])
def test_gains_that_run_already_have_no_time_to_be_installed_by(
    store: Store, loop: LoopView, kind: str
) -> None:
    later = (store.clock() + timedelta(days=1)).isoformat()
    with pytest.raises(FieldErrors) as refused:
        store.submit(kind=kind, install_by=later)
    assert _pointers(refused) == ["/install_by"]


def test_found_gains_that_are_those_in_force_are_nothing_new(store: Store, loop: LoopView) -> None:
    submission = store.submit()
    store.approve(submission)
    store.install(submission)
    with pytest.raises(Conflict):
        store.submit(kind="baseline")
    assert store.read(submission).state == "in_force"


def test_a_return_goes_back_to_gains_that_were_approved_and_is_approved_again(
    store: Store, loop: LoopView
) -> None:
    first = store.submit()
    store.approve(first)
    store.install(first)
    store.submit(kind="emergency", controller=gains(1.2))
    in_other_units = gains(integral={"value": 10.0 / 60.0, "unit": "minutes"})
    back = store.submit(kind="return", controller=in_other_units)
    store.approve(back)
    store.install(back)
    assert (store.read(first).state, store.read(back).state) == ("superseded", "in_force")


def test_gains_that_were_only_submitted_are_nothing_to_return_to(store: Store, loop: LoopView) -> None:
    store.submit(controller=gains(1.2))
    with pytest.raises(FieldErrors) as refused:
        store.submit(kind="return", controller=gains(1.2))
    assert _pointers(refused) == ["/controller"]


def test_a_first_approval_of_two_is_none_to_return_to(store: Store) -> None:
    store.add_model(store.register(safety_related=True))
    store.approve(store.submit(controller=gains(1.2)))
    with pytest.raises(FieldErrors):
        store.submit(kind="return", controller=gains(1.2))


def _gain_set(*points: str, gain: float = 1.0) -> dict[str, object]:
    return {"condition": f"at {points[0]}", "operating_points": list(points), "controller": gains(gain)}


def test_each_gain_set_is_judged_at_the_operating_points_it_names(store: Store, loop: LoopView) -> None:
    store.add_model(loop, operating_point="high load", gain=4.0)
    sets = [_gain_set("normal", gain=1.5), _gain_set("HIGH LOAD", gain=0.4)]
    content = store.submit(controller=None, gain_sets=sets).content
    judged = [(r.gain_set, r.operating_point) for r in content.recomputations]
    assert judged == [(0, "normal"), (1, "high load")]


@pytest.mark.parametrize(
    ("sets", "pointer"),
    [
        ([_gain_set("normal")], "/gain_sets"),
        ([_gain_set("normal", "high load"), _gain_set("normal")], "/gain_sets/1/operating_points/0"),
        ([_gain_set("normal", "high load", "start-up")], "/gain_sets/0/operating_points/2"),
    ],
)
def test_gain_sets_cover_each_operating_point_once(
    store: Store, loop: LoopView, sets: list[object], pointer: str
) -> None:
    store.add_model(loop, operating_point="high load")
    with pytest.raises(FieldErrors) as refused:
        store.submit(controller=None, gain_sets=sets)
    assert _pointers(refused) == [pointer]


def test_a_loop_that_cannot_be_formed_is_named_where_it_stands(store: Store) -> None:
    loop = store.register()
    inverting = {"kind": "transfer_function", "numerator": [-1.0], "denominator": [1.0]}
    document = {"plant_model": inverting, "operating_point": "normal", "evidence": "none"}
    with store.database.writing() as session:
        version = read(ModelVersion, document)
        loops.add_model(session, store.actor("submitter"), loop.id, version, store.clock())
    # L = -1 at infinite frequency: 1 + L is zero there
    proportional_only = GAINS | {"integral": None, "proportional": {"value": 1.0, "unit": "gain"}}
    with pytest.raises(FieldErrors) as refused:
        store.submit(controller=proportional_only)
    assert _pointers(refused)[0] in ("/controller", "/loop")


def test_what_changed_between_recomputing_and_keeping_is_a_conflict(store: Store, loop: LoopView) -> None:
    prepared = store.prepare()
    store.add_model(loop, gain=1.1)
    before = store.counts()
    with pytest.raises(BasisChanged, match="plant models"), store.database.writing() as session:
        submissions.submit(session, store.actor("submitter"), prepared, store.clock())
    assert store.counts() == before
