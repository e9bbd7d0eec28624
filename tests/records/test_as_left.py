"""Gains that were left otherwise than approved are recomputed as if they had been submitted."""

from __future__ import annotations

import json
from typing import Any

import pytest

from service.documents.loops import ModelVersion
from service.documents.reading import read
from service.records import installations, left_otherwise, loops
from service.records.content import InstallationContent, RecomputedAsLeft, read_installation
from service.records.errors import BasisChanged, WrongStep
from service.records.views import LoopView, SubmissionView
from service.verification.verifier import verify
from tests.records.store import WIDER, Store, gains


def approved(store: Store, **changes: object) -> SubmissionView:
    submission = store.submit(**changes)
    store.approve(submission)
    return submission


def left(store: Store, submission: SubmissionView, **changes: Any) -> RecomputedAsLeft:
    """Install, and return what was recomputed of it."""
    made = store.install(submission, **changes).installation.as_left_recomputed
    assert made is not None
    return made


def with_plant(store: Store, loop: LoopView, plant: dict[str, Any], point: str = "normal") -> None:
    version = read(ModelVersion, {"plant_model": plant, "operating_point": point, "evidence": "given"})
    with store.database.writing() as session:
        loops.add_model(session, store.actor("submitter"), loop.id, version, store.clock())


OTHERWISE: dict[str, tuple[dict[str, Any], str]] = {
    "a little more": (gains(2.0), "stable"),
    "the point lost": (gains(15.0), "unstable"),
    "minutes for seconds": (gains(integral={"value": 10.0, "unit": "minutes"}), "stable"),
    "the action turned round": (gains(action="direct"), "unstable"),
    "another form": (
        gains(
            form="parallel",
            integral={"value": 0.5, "unit": "gain_per_second"},
            derivative={"value": 1.0, "unit": "gain_seconds"},
            derivative_filter={"value": 0.5, "unit": "seconds"},
        ),
        "stable",
    ),
    "a scan": (
        gains(2.0, scan={"interval_s": 1.0, "method": "backward_difference", "output_delay_s": 0.0}),
        "stable",
    ),
}


@pytest.mark.parametrize("name", OTHERWISE)
def test_what_is_recomputed_is_what_a_submission_of_these_gains_would_have_got(
    store: Store, loop: LoopView, name: str
) -> None:
    controller, verdict = OTHERWISE[name]
    found = left(store, approved(store), as_left=controller)
    submitted = store.submit(controller=controller).content
    assert found.verdict == verdict
    (recomputed,), (reference,) = found.recomputations, submitted.recomputations
    assert recomputed.result == reference.answer
    assert recomputed.criteria == reference.criteria
    assert recomputed.hard_floors == reference.hard_floors
    assert (found.criteria, found.criteria_source) == (submitted.criteria, submitted.criteria_source)
    assert (recomputed.model.id, recomputed.model.version) == (submitted.models[0].id, 1)


@pytest.mark.parametrize(("gain", "verdict"), [(4.24, "stable"), (4.26, "unstable")])
def test_the_verdict_turns_where_the_textbook_says(
    store: Store, loop: LoopView, gain: float, verdict: str
) -> None:
    # 2·Kc·e^(−s)/(5s+1) reaches its limit at Kc = 4.2512: ω = 1.68868 solves atan(5ω) + ω = π, and
    # Kc = sqrt(1 + 25·ω²)/2 (closed form; the value is printed in textbooks of process control, from memory)
    with_plant(store, loop, {"kind": "first_order", "gain": 2.0, "time_constant_s": 5.0, "dead_time_s": 1.0})
    submission = approved(store, controller=gains(1.0, integral=None))
    found = left(store, submission, as_left=gains(gain, integral=None))
    assert found.verdict == verdict
    margins = found.recomputations[0].result.continuous.margins
    if verdict == "unstable":
        assert margins is None
    else:
        assert margins is not None
        assert margins.gain_margin == pytest.approx(4.2512 / gain, rel=2e-5)


def test_nothing_is_recomputed_of_the_approved_gains_in_another_form(store: Store, loop: LoopView) -> None:
    same = gains(form="parallel", integral={"value": 0.15, "unit": "gain_per_second"})
    done = store.install(approved(store), as_left=same).installation
    assert (done.as_approved, done.as_left_recomputed) == (True, None)


def test_every_operating_point_in_force_is_asked_and_the_worst_one_decides(
    store: Store, loop: LoopView
) -> None:
    store.add_model(loop, operating_point="high load", gain=4.0)
    found = left(store, approved(store, controller=gains(0.5)), as_left=gains(3.0))
    told = {each.model.operating_point: each.result.verdict for each in found.recomputations}
    assert told == {"normal": "stable", "high load": "unstable"}
    assert found.verdict == "unstable"


def test_the_models_and_limits_of_now_count_and_not_those_of_the_approval(
    store: Store, loop: LoopView
) -> None:
    submission = approved(store)
    store.add_model(loop, gain=4.0)
    store.decide_change(store.propose(loop, pv=WIDER, criteria={"gain_margin_min": 1.1}))
    found = left(store, submission, as_left=gains(2.5))
    assert (found.verdict, found.recomputations[0].model.version) == ("unstable", 2)
    assert (found.loop_revision, found.criteria_source) == (2, "loop")


def test_without_a_model_nothing_is_assessed_and_said_so(store: Store) -> None:
    store.register()
    submission = store.submit(kind="emergency")
    found = left(store, submission, as_left=gains(15.0))
    assert (found.verdict, found.recomputations, found.criteria) == ("not_assessed", (), ())


def test_gains_that_were_installed_first_are_recomputed_as_others_are(store: Store, loop: LoopView) -> None:
    submission = store.submit(kind="emergency")
    assert left(store, submission, as_left=gains(15.0)).verdict == "unstable"
    assert store.read(submission).state == "installed_awaiting_review"


def test_gains_that_form_no_loop_are_recorded_and_undecided(store: Store, loop: LoopView) -> None:
    # P(∞) = −1 and Kc = 1 make 1 + L(∞) = 0: no such loop can be closed
    plant = {"kind": "transfer_function", "numerator": [-1.0, -0.5], "denominator": [1.0, 1.0]}
    with_plant(store, loop, plant)
    submission = store.submit(kind="emergency", controller=gains(0.4, integral=None))
    found = left(store, submission, as_left=gains(1.0, integral=None))
    assert (found.verdict, found.recomputations) == ("undecided", ())
    (failed,) = found.not_recomputed
    assert (failed.model.operating_point, failed.model.version) == ("normal", 2)
    assert failed.reason
    assert store.read(submission).installations[0].installation.as_left_recomputed == found


def test_beside_a_point_that_cannot_be_recomputed_no_other_makes_it_stable(
    store: Store, loop: LoopView
) -> None:
    plant = {"kind": "transfer_function", "numerator": [-1.0, -0.5], "denominator": [1.0, 1.0]}
    with_plant(store, loop, plant, "washing")
    submission = store.submit(kind="emergency", controller=gains(0.4, integral=None))
    found = left(store, submission, as_left=gains(1.0, integral=None))
    assert [each.result.verdict for each in found.recomputations] == ["stable"]
    assert found.verdict == "undecided"


@pytest.fixture
def scheduled(store: Store, loop: LoopView) -> SubmissionView:
    """Approved gains for two conditions."""
    store.add_model(loop, operating_point="high load", gain=2.0)
    return approved(store, controller=None, gain_sets=_schedule(low=1.5, high=0.7))


def _schedule(low: float, high: float) -> list[dict[str, Any]]:
    return [
        {"condition": "low", "operating_points": ["normal"], "controller": gains(low)},
        {"condition": "high", "operating_points": ["high load"], "controller": gains(high)},
    ]


def _sets(**typed: float) -> dict[str, Any]:
    sets = [
        {"condition": condition, "as_found": gains(1.0), "as_left": gains(value)}
        for condition, value in typed.items()
    ]
    return {"as_found": None, "as_left": None, "gain_sets": sets}


def _points(found: RecomputedAsLeft) -> dict[str, tuple[int, str]]:
    return {each.model.operating_point: (each.gain_set, each.result.verdict) for each in found.recomputations}


def test_of_a_schedule_the_set_that_is_otherwise_is_recomputed_at_its_own_points(
    store: Store, scheduled: SubmissionView
) -> None:
    found = left(store, scheduled, **_sets(low=1.5, high=7.0))
    assert _points(found) == {"high load": (1, "unstable")}
    assert [(each.gain_set, each.condition) for each in found.gain_sets] == [(1, "high")]


def test_a_set_that_was_left_otherwise_before_still_counts(store: Store, scheduled: SubmissionView) -> None:
    left(store, scheduled, **_sets(high=7.0))
    found = left(store, scheduled, **_sets(low=1.6))
    assert _points(found) == {"normal": (0, "stable"), "high load": (1, "unstable")}
    assert found.verdict == "unstable"
    store.install(scheduled, **_sets(high=0.7))
    assert _points(left(store, scheduled, **_sets(low=1.6))) == {"normal": (0, "stable")}


def test_a_set_that_other_gains_took_the_place_of_counts_no_more(
    store: Store, scheduled: SubmissionView
) -> None:
    left(store, scheduled, **_sets(high=7.0))
    store.submit(kind="baseline", controller=None, gain_sets=_schedule(low=1.2, high=0.6))
    assert _points(left(store, scheduled, **_sets(low=1.6))) == {"normal": (0, "stable")}


def test_a_set_without_a_model_at_its_points_is_not_assessed(
    store: Store, loop: LoopView, scheduled: SubmissionView
) -> None:
    store.decide_change(store.propose(loop, retire="high load"))
    found = left(store, scheduled, **_sets(low=1.6, high=0.8))
    assert _points(found) == {"normal": (0, "stable")}
    assert found.verdict == "not_assessed"
    assert left(store, scheduled, **_sets(low=15.0, high=0.8)).verdict == "unstable"


def _record(store: Store, prepared: installations.PreparedInstallation) -> InstallationContent:
    with store.database.writing() as session:
        made = installations.install(session, store.actor("submitter"), prepared, store.clock())
    return made.installation


def test_what_was_recomputed_on_another_basis_is_not_recorded(store: Store, loop: LoopView) -> None:
    submission = approved(store)
    prepared = store.prepare_installation(submission, as_left=gains(2.5))
    store.add_model(loop, gain=4.0)
    with pytest.raises(BasisChanged, match=r"the plant models changed; record the installation again"):
        _record(store, prepared)
    assert store.read(submission).installations == ()
    assert left(store, submission, as_left=gains(2.5)).verdict == "unstable"


def test_approved_gains_are_recorded_whatever_has_moved_meanwhile(store: Store, loop: LoopView) -> None:
    prepared = store.prepare_installation(approved(store))
    store.add_model(loop, gain=4.0)
    assert _record(store, prepared).as_approved


def test_gains_that_come_into_force_meanwhile_hinder_no_record(store: Store, loop: LoopView) -> None:
    submission = approved(store)
    prepared = store.prepare_installation(submission, as_left=gains(15.0))
    store.install(submission)
    assert not _record(store, prepared).as_approved


def test_another_set_that_is_left_otherwise_meanwhile_is_recomputed_too(
    store: Store, scheduled: SubmissionView
) -> None:
    prepared = store.prepare_installation(scheduled, **_sets(low=1.6))
    store.install(scheduled, **_sets(high=7.0))
    with pytest.raises(BasisChanged, match="what was left in the controller"):
        _record(store, prepared)


def test_a_step_that_there_is_not_is_refused_before_anything_is_recomputed(
    store: Store, loop: LoopView
) -> None:
    submission = store.submit()
    with pytest.raises(WrongStep):
        store.prepare_installation(submission, as_left=gains(15.0))


def test_it_is_read_back_as_it_was_computed_and_the_history_vouches_for_it(
    store: Store, loop: LoopView
) -> None:
    submission = approved(store)
    found = left(store, submission, as_left=gains(15.0))
    assert store.read(submission).installations[0].installation.as_left_recomputed == found
    kind, _, content = store.last_entry()
    told = content["installation"]["as_left_recomputed"]
    assert (kind, told["verdict"]) == ("gains_installed_otherwise", "unstable")
    assert [(each["model"]["version"], each["verdict"]) for each in told["recomputations"]] == [
        (1, "unstable")
    ]
    assert {each["finding"]["outcome"] for each in told["criteria"]} == {"not_assessed"}
    assert told["loop_revision"] == found.loop_revision == 1
    assert told["gain_sets"][0]["controller"]["proportional"]["value"] == 15.0
    assert (told["criteria_source"], told["not_recomputed"]) == ("service_floors", [])
    assert told["recomputations"][0]["gain_set"] == 0
    assert verify(store.url).holds


def test_an_installation_from_before_still_reads(store: Store, loop: LoopView) -> None:
    submission = approved(store)
    kept = json.dumps(_plain(store, submission), ensure_ascii=False).encode()
    assert b"as_left_recomputed" not in kept
    read_back = read_installation(kept)
    assert (read_back.as_approved, read_back.as_left_recomputed) == (False, None)


def _plain(store: Store, submission: SubmissionView) -> dict[str, Any]:
    """An installation as it was kept before there was a recomputation."""
    store.install(submission, as_left=gains(15.0))
    content: dict[str, Any] = store.last_entry()[2]["installation"]
    del content["as_left_recomputed"]
    return content


def test_the_last_word_on_each_submission_is_told(store: Store, loop: LoopView) -> None:
    first = approved(store)
    second = approved(store)

    def told() -> dict[str, str | None]:
        with store.database.reading() as session:
            found = left_otherwise.recomputed(session, (first.id, second.id))
        return {each: left.verdict if left else None for each, left in found.items()}

    assert told() == {}
    left(store, first, as_left=gains(2.0))
    left(store, first, as_left=gains(15.0))
    assert told() == {first.id: "unstable"}
    left(store, second, as_left=gains(2.0))
    assert told() == {first.id: "unstable", second.id: "stable"}
    store.install(second)
    assert told() == {}


def test_no_model_of_another_loop_is_asked(store: Store, loop: LoopView) -> None:
    other = store.register(tag="FIC-102")
    store.add_model(other, gain=9.0)
    found = left(store, approved(store), as_left=gains(2.0))
    assert (found.verdict, len(found.recomputations)) == ("stable", 1)
