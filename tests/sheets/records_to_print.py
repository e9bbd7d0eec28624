"""Records as the service would show them, recomputed by the service itself from an invented plant."""

from __future__ import annotations

import base64
from dataclasses import replace
from datetime import UTC, datetime, timedelta

from service.analysis.controller import (
    Controller,
    DerivativeFilter,
    DerivativeTime,
    IdealController,
    IntegralTime,
    Proportional,
    RecordedSetting,
)
from service.analysis.plant import FirstOrder, Integrating, PlantModel, Range, Ranges
from service.analysis.recomputation import recompute
from service.documents.decisions import Deviation
from service.documents.installations import InstallationRequest
from service.documents.loops import LoopRegistration, ModelVersion
from service.documents.recomputations import judged
from service.documents.submissions import Tool
from service.judgement.claims import Claims
from service.judgement.criteria import Criteria, past_hard_floors
from service.records.content import (
    DecisionContent,
    Difference,
    InstallationContent,
    Person,
    SignedContent,
    SignedGains,
    SignedGainsInForce,
    SignedModel,
    SignedRecomputation,
    WorstCriterion,
)
from service.records.lifecycle import State
from service.records.views import (
    Checkpoint,
    CurvesView,
    DecisionView,
    EntryReference,
    InstallationView,
    SubmissionView,
)

NOON = datetime(2031, 3, 14, 12, 0, 0, tzinfo=UTC)
ENGINEER = Person(name="r.okafor", full_name="Ruth Okafor")
REVIEWER = Person(name="l.brandt", full_name="Lena Brandt")
LAG = FirstOrder(kind="first_order", gain=1.6, time_constant_s=95.0, dead_time_s=18.0)
LEVEL = Integrating(kind="integrating", gain_per_s=0.004, dead_time_s=6.0)
RUNAWAY = FirstOrder(kind="first_order", gain=1.2, time_constant_s=-60.0, dead_time_s=2.0)
CRITERIA = Criteria(
    gain_margin_min=2.5,
    gain_reduction_margin_max=0.5,
    phase_margin_deg_min=45.0,
    max_sensitivity_max=1.8,
    overshoot_percent_max=10.0,
    settling_time_s_max=600.0,
)
LOOP = LoopRegistration(
    site="Quarry Lane Works",
    tag="TIC-2104",
    description="Jacket water temperature, second dryer",
    area="Drying",
    pv=Range(low=0, high=120, unit="°C"),
    output=Range(low=0, high=100, unit="%"),
    service_class="temperature",
    criteria=CRITERIA,
    fail_position="closes on loss of air",
)
TUNED = IdealController(
    form="ideal",
    action="reverse",
    proportional=Proportional(value=1.8, unit="gain", displayed="1.80"),
    integral=IntegralTime(value=1.5, unit="minutes", displayed="1.50"),
    derivative=DerivativeTime(value=7.0, unit="seconds"),
    derivative_filter=DerivativeFilter(value=10.0, unit="ratio"),
    recorded_settings=(
        RecordedSetting(name="output high limit", value=95.0, unit="%"),
        RecordedSetting(name="anti-windup", value="back calculation"),
    ),
)
EARLIER = IdealController(
    form="ideal",
    action="reverse",
    proportional=Proportional(value=80.0, unit="percent_band", displayed="80.0"),
    integral=IntegralTime(value=0.5, unit="repeats_per_minute"),
)
RUNS_AWAY = replace(TUNED, proportional=Proportional(value=14.0, unit="gain"))
NEAR_THE_LIMIT = replace(TUNED, proportional=Proportional(value=5.0, unit="gain"))


def gains(controller: Controller, condition: str | None = None, *points: str) -> SignedGains:
    return SignedGains(condition=condition, operating_points=points, controller=controller)


def models(*plants: PlantModel) -> tuple[SignedModel, ...]:
    names = ("normal throughput", "low throughput", "washing")
    return tuple(
        SignedModel(
            id=f"model-{index}",
            version=index + 1,
            model=ModelVersion(
                plant_model=plant,
                operating_point=names[index],
                evidence="Two step tests of 4 % up and down on 2 March, fitted by the area method.",
            ),
        )
        for index, plant in enumerate(plants)
    )


def recomputed(
    loop: LoopRegistration, model: SignedModel, controller: Controller, gain_set: int, claims: Claims | None
) -> tuple[SignedRecomputation, CurvesView]:
    found = recompute(
        model.model.plant_model, controller, ranges=Ranges(pv=loop.pv, output=loop.output), with_curves=True
    )
    curves = found.curves
    assert curves is not None
    bare = replace(found, curves=None)
    criteria = loop.criteria or Criteria()
    signed = SignedRecomputation(
        model_id=model.id,
        operating_point=model.model.operating_point,
        gain_set=gain_set,
        criteria=criteria,
        answer=judged(bare, criteria, claims),
        curves_digest="c" * 64,
        hard_floors=past_hard_floors(bare),
    )
    view = CurvesView(
        model_id=model.id,
        operating_point=model.model.operating_point,
        gain_set=gain_set,
        curves=curves,
    )
    return signed, view


def submission(
    *,
    controller: Controller = TUNED,
    gain_sets: tuple[SignedGains, ...] | None = None,
    earlier: Controller | None = EARLIER,
    plants: tuple[PlantModel, ...] = (LAG,),
    loop: LoopRegistration = LOOP,
    state: State = "awaiting_review",
    claims: Claims | None = None,
    **further: object,
) -> tuple[SubmissionView, tuple[CurvesView, ...], tuple[CurvesView, ...]]:
    """A view, its own curves, and the curves of the gains in force."""
    sets = gain_sets or (gains(controller),)
    signed_models = models(*plants)
    pairs = [
        recomputed(loop, model, each.controller, index, claims)
        for index, each in enumerate(sets)
        for model in signed_models
        if not each.operating_points or model.model.operating_point in each.operating_points
    ]
    before = [recomputed(loop, model, earlier, 0, None)[1] for model in signed_models] if earlier else []
    content = SignedContent(
        submission_id="01JQ7Z4M8W",
        loop_id="01JPA0",
        loop_revision=3,
        loop=loop,
        kind="planned",
        reason="The loop has been swinging since the heat exchanger was cleaned.",
        safety_effect="None: the high temperature trip is independent of this loop.",
        gain_sets=sets,
        submitted_by=ENGINEER,
        submitted_at=NOON,
        prepared_by=(ENGINEER,),
        tool=Tool(name="step fitter", version="2.3.1"),
        claims=claims,
        temporary_until=None,
        install_by=None,
        models=signed_models,
        criteria_source="loop" if loop.criteria else "service_floors",
        criteria=tuple(_worst(pairs)),
        recomputations=tuple(signed for signed, _ in pairs),
        gains_in_force=_in_force(earlier) if earlier else None,
    )
    view = SubmissionView(
        id=content.submission_id,
        state=state,
        content=replace(content, **further) if further else content,
        content_digest="3f" * 32,
        area=loop.area,
        verdict=None,
        approvals_needed=1,
        deviations_needed=(),
        hindrances=(),
        changed_basis=(),
        decisions=(),
        installations=(),
        comparisons=(),
        effects=(),
        review_due_at=None,
        overdue=False,
        recheck_due=None,
        open_actions=(),
        entry=EntryReference(number=417, digest="a1" * 32, time=NOON),
    )
    return view, tuple(curves for _, curves in pairs), tuple(before)


CHECKPOINT = Checkpoint(
    origin="0e" * 32,
    size=421,
    digest="5d" * 32,
    head="b7" * 32,
    time=NOON + timedelta(hours=1),
    public_key=base64.b64encode(b"\xff" * 32).decode(),
    signature=base64.b64encode(b"\xfe" * 64).decode(),
)
"""As long as a true one; the sheet tells it and does not judge it."""


def decided(
    view: SubmissionView,
    decision: str = "approve",
    checkpoint: Checkpoint | None = CHECKPOINT,
    **further: object,
) -> SubmissionView:
    """The view with a signature by the reviewer, an hour later."""
    signed = DecisionContent(
        decision_id="01JQ8",
        submission_id=view.id,
        decision=decision,
        meaning="I have reviewed these gains and approve them for entry.",
        reason="Margins are ample and the response is calm.",
        deviation=(),
        content_digest=view.content_digest,
        signed_by=REVIEWER,
        signed_at=NOON + timedelta(hours=1),
    )
    entry = EntryReference(number=421, digest="b7" * 32, time=NOON + timedelta(hours=1))
    made = DecisionView(decision=replace(signed, **further), entry=entry, checkpoint=checkpoint)
    view = replace(view, decisions=(made,))
    return replace(view, state="approved" if decision == "approve" else "rejected")


def installed(
    view: SubmissionView, controller: Controller = TUNED, differences: tuple[Difference, ...] = ()
) -> SubmissionView:
    request = InstallationRequest(
        as_found=EARLIER,
        as_left=controller,
        installed_at=NOON + timedelta(hours=3),
        typed_by="M. Sato",
        read_back_by="K. Oyelaran",
        operator="J. Lind",
        saved_to_engineering_database=True,
    )
    content = InstallationContent(
        installation_id="01JQ9",
        submission_id=view.id,
        gain_set=0,
        recorded_by=ENGINEER,
        recorded_at=NOON + timedelta(hours=4),
        installation=request,
        as_approved=not differences,
        before_approval=False,
        differences=differences,
        as_found_differences=(),
    )
    entry = EntryReference(number=430, digest="d4" * 32, time=NOON + timedelta(hours=4))
    return replace(
        view, state="in_force", installations=(InstallationView(installation=content, entry=entry),)
    )


DEVIATION = Deviation(criterion="overshoot_percent_max", reason="Overshoot does no harm to jacket water.")


def _in_force(earlier: Controller) -> SignedGainsInForce:
    return SignedGainsInForce(submission_id="01JK2", content_digest="9c" * 32, gain_sets=(gains(earlier),))


def _worst(pairs: list[tuple[SignedRecomputation, CurvesView]]) -> list[WorstCriterion]:
    """One for each limit: at the first point where it is not met, else at the first point."""
    found: dict[str, WorstCriterion] = {}
    for signed, _ in pairs:
        for finding in signed.answer.criteria:
            known = found.get(finding.criterion)
            if known is None or (known.finding.outcome == "met" and finding.outcome != "met"):
                found[finding.criterion] = WorstCriterion(
                    finding=finding, operating_point=signed.operating_point, gain_set=signed.gain_set
                )
    return list(found.values())
