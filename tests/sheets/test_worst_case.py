"""The worst case over the model's uncertainty stands beside the margins, in words."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.analysis.controller import Scan
from service.analysis.plant import Uncertainty
from service.documents.recomputations import RecomputationRequest, answer
from service.judgement.criteria import Criteria
from service.sheets.assessments import Assessment, assessment
from service.sheets.content import content_of
from tests.analysis.entered import first_order, ideal
from tests.sheets.records_to_print import LAG, TUNED, submission

BOX = Uncertainty(gain=(0.8, 1.25), time_constants=(0.8, 1.25), dead_time=(0.7, 1.4))


def told(
    kc: float, box: Uncertainty | None = BOX, criteria: Criteria | None = None, scan: Scan | None = None
) -> Assessment:
    plant, controller = replace(first_order(2.0, 10.0, 3.0), uncertainty=box), ideal(kc, 10.0)
    request = RecomputationRequest(
        plant_model=plant, controller=replace(controller, scan=scan), criteria=criteria
    )
    return assessment("Normal load", answer(request), ())


def rows(found: Assessment) -> dict[str, str]:
    return {row.name: row.value for row in found.limits}


def test_a_proven_box_stands_among_the_margins() -> None:
    found = rows(told(0.6))
    assert found["Stable for every model within the uncertainty"] == "yes, proven"
    assert found["Maximum sensitivity of the worst model within the uncertainty"] == "at most 2.09"


def test_a_scanned_loop_is_not_told_more_of_its_box_than_was_computed() -> None:
    scan = Scan(interval_s=0.5, method="backward_difference")
    found = rows(told(0.6, scan=scan))
    assert found["Stable for every model within the uncertainty"] == "yes, proven, without the scan"
    sensitivity = found["Maximum sensitivity of the worst model within the uncertainty"]
    assert sensitivity == "at most 2.09, without the scan"


def test_an_unstable_member_stands_among_the_margins() -> None:
    found = told(1.6)
    assert rows(found)["Stable for every model within the uncertainty"] == "NO"
    assert "Maximum sensitivity of the worst model within the uncertainty" not in rows(found)
    assert not next(row for row in found.limits if row.value == "NO").met
    further = {entry.name: entry.value for entry in found.further}
    assert not [name for name in further if name.startswith("Worst gain")]
    assert further["Not stable at"] == "gain × 1.25, time constants × 0.800, dead time × 1.40"


def test_a_limited_quantity_is_not_told_twice() -> None:
    found = told(0.6, criteria=Criteria(worst_case_max_sensitivity_max=2.5))
    named = [
        row
        for row in found.limits
        if row.name == "Maximum sensitivity of the worst model within the uncertainty"
    ]
    assert [row.outcome for row in named] == ["✓ met"]


def test_without_uncertainty_there_is_no_box() -> None:
    assert not [name for name in rows(told(0.6, None)) if "uncertainty" in name]


def test_the_worst_margins_stand_among_all_computed_figures() -> None:
    further = {entry.name: entry.value for entry in told(0.6).further}
    assert further["Worst gain margin"] == "2.11"
    assert further["Worst phase margin"] == "53.0°"
    assert further["Worst case computed for the analysis"] == "continuous"
    assert further["Scale of model error that is tolerated"].startswith("2.")


@pytest.mark.parametrize(
    ("boxes", "words"),
    [
        ([BOX], "The recomputed loop is stable, and so is every model within the stated uncertainty."),
        ([BOX, None], "The recomputed loop is stable."),
        ([None], "The recomputed loop is stable."),
        (
            [None, Uncertainty(dead_time=(1.0, 9.0))],
            "The recomputed loop is stable as modelled, but NOT for every model within the stated "
            "uncertainty.",
        ),
    ],
)
def test_the_line_beside_the_gains_says_what_holds_within_the_uncertainty(
    boxes: list[Uncertainty | None], words: str
) -> None:
    view, *_ = submission(plants=tuple(replace(LAG, uncertainty=box) for box in boxes))
    content = content_of(view)
    assert content.summary.startswith(words)
    assert content.summary_good is ("NOT" not in words)


def test_the_line_beside_the_gains_of_a_scanned_loop_says_that_the_scan_is_left_out() -> None:
    scanned = replace(TUNED, scan=Scan(interval_s=1.0, method="backward_difference"))
    view, *_ = submission(plants=(replace(LAG, uncertainty=BOX),), controller=scanned)
    words = "every model within the stated uncertainty (computed without the scan)."
    assert words in content_of(view).summary


def test_a_loop_that_is_unstable_at_its_scan_is_nowhere_told_as_stable_for_every_model() -> None:
    near = Uncertainty(gain=(0.9, 1.1), time_constants=(0.9, 1.1), dead_time=(0.9, 1.1))
    scan = Scan(interval_s=12.0, method="backward_difference")
    found = told(1.0, near, Criteria(worst_case_gain_margin_min=1.1), scan)
    (row,) = (row for row in found.limits if row.name == "Stable for every model within the uncertainty")
    assert row.value == "NO, unstable at its scan"
    assert not row.met
    assert rows(found)["Gain margin of the worst model within the uncertainty"] == "not defined"
    assert "Maximum sensitivity of the worst model within the uncertainty" not in rows(found)
    assert not [row for row in found.limits if row.met]
    further = {entry.name: entry.value for entry in found.further}
    assert further["Worst case computed for the analysis"] == "continuous; at its scan the loop is unstable"
    assert further["Worst gain margin"] == "1.98, without the scan"


def test_a_limited_figure_of_the_box_of_a_scanned_loop_says_that_the_scan_is_left_out() -> None:
    scan = Scan(interval_s=0.5, method="backward_difference")
    found = told(0.6, criteria=Criteria(worst_case_max_sensitivity_max=2.5), scan=scan)
    sensitivity = rows(found)["Maximum sensitivity of the worst model within the uncertainty"]
    assert sensitivity == "2.09, without the scan"
