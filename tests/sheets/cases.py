"""The sheets that the tests print: an ordinary one, and those that try the paper hardest."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from service.analysis.controller import (
    DerivativeFilter,
    FilterTime,
    IntegralTime,
    ParallelController,
    Proportional,
    RecordedSetting,
    SetpointWeight,
    TwoZerosController,
)
from service.analysis.plant import Uncertainty
from service.documents.loops import LoopReference
from service.documents.submissions import Tool
from service.judgement.claims import Claims
from service.records.content import Difference
from service.sheets.content import SheetContent, content_of
from tests.sheets.records_to_print import (
    CHECKPOINT,
    DEVIATION,
    EARLIER,
    LAG,
    LEVEL,
    LOOP,
    NEAR_THE_LIMIT,
    NOON,
    REVIEWER,
    RUNAWAY,
    RUNS_AWAY,
    TUNED,
    decided,
    gains,
    installed,
    submission,
)

HOSTILE = '<img src="file:///etc/hostname"/> <b>bold</b> &amp; <a href="javascript:1">x</a> </para> <seq/>'
UNBROKEN = "W" * 200
CLAIMS = Claims(gain_margin=3.1, phase_margin_deg=60.0, overshoot_percent=4.0, max_sensitivity="unbounded")
PARALLEL_UNKNOWNS = ParallelController(
    form="parallel",
    action="reverse",
    proportional=Proportional(value=1.2, unit="gain"),
    setpoint_weight="unknown",
    measurement_filter_s="unknown",
    scan="unknown",
    algorithm="incremental",
)


def ordinary() -> SheetContent:
    view, curves, before = submission(claims=CLAIMS)
    return content_of(
        decided(view, deviation=(DEVIATION,)), curves, curves_in_force=before, demonstration=True
    )


def in_force() -> SheetContent:
    view, curves, before = submission(prepared_by=(REVIEWER,), install_by=NOON, temporary_until=NOON)
    difference = Difference(
        setting="integral", unit="gain_per_second", recorded=0.02, found=0.019, hinders=True
    )
    unsigned = replace(CHECKPOINT, public_key=None, signature=None)
    signed = decided(view, checkpoint=unsigned)
    view = replace(installed(signed, differences=(difference,)), approvals_needed=2, overdue=True)
    return content_of(replace(view, review_due_at=NOON), curves, curves_in_force=before)


def unstable() -> SheetContent:
    view, curves, before = submission(controller=RUNS_AWAY)
    return content_of(view, curves, curves_in_force=before)


def below_the_hard_floor() -> SheetContent:
    """Stable, and so near the limit that nobody can approve it."""
    view, curves, before = submission(controller=NEAR_THE_LIMIT)
    return content_of(view, curves, curves_in_force=before)


def undecided() -> SheetContent:
    """An answer that says so, as the service gives it where two methods differ."""
    view, *_ = submission()
    signed = view.content.recomputations[0]
    plain = signed.answer
    stability = replace(plain.continuous.stability, verdict="undecided", reason="the two methods differ")
    analysis = replace(
        plain.continuous, stability=stability, margins=None, setpoint_step=None, load_step=None
    )
    open_limits = tuple(replace(each, value=None, outcome="not_assessed") for each in plain.criteria)
    answer = replace(
        plain,
        verdict="undecided",
        continuous=analysis,
        findings=open_limits,
        not_computed=("worst_case",),
    )
    content = replace(
        view.content,
        recomputations=(replace(signed, answer=answer),),
        criteria=tuple(
            replace(worst, finding=finding)
            for worst, finding in zip(view.content.criteria, open_limits, strict=True)
        ),
    )
    return content_of(replace(view, content=content))


def two_zeros() -> SheetContent:
    controller = TwoZerosController(
        form="two_zeros",
        action="reverse",
        gain=12.6,
        zeros_rad_s=((-0.03, 0.01), (-0.03, -0.01)),
        derivative_filter=FilterTime(value=2.0, unit="seconds", displayed="2.000"),
    )
    view, curves, before = submission(controller=controller)
    return content_of(decided(view, checkpoint=None), curves, curves_in_force=before)


def gain_sets() -> SheetContent:
    low = replace(TUNED, proportional=Proportional(value=0.9, unit="gain", displayed="0.90"))
    sets = (
        gains(TUNED, "load above 60 %", "normal throughput"),
        gains(low, "load below 60 %", "low throughput"),
    )
    view, curves, before = submission(gain_sets=sets, plants=(LAG, replace(LAG, gain=2.4, dead_time_s=30.0)))
    return content_of(decided(view), curves, curves_in_force=before)


def twenty_sets() -> SheetContent:
    numbers = [RecordedSetting(name="number", value=float(index)) for index in range(20)]
    sets = tuple(
        gains(replace(TUNED, recorded_settings=(number,)), f"set {number.value}", "normal throughput")
        for number in numbers
    )
    view, curves, _ = submission(gain_sets=sets, earlier=None)
    return content_of(decided(view), curves)


def no_earlier_gains() -> SheetContent:
    view, curves, _ = submission(earlier=None, loop=replace(LOOP, criteria=None, safety_related=True))
    return content_of(replace(view, state="rejected"), curves)


def no_model() -> SheetContent:
    view, *_ = submission(plants=(), kind="baseline")
    return content_of(replace(view, state="recorded"))


def hostile() -> SheetContent:
    loop = replace(
        LOOP,
        tag="<b>TIC</b>&1",
        site="<i>Works",
        description=HOSTILE,
        area=HOSTILE,
        service_class=HOSTILE,
        fail_position=HOSTILE,
        inner_loop=LoopReference(site="<b>", tag="&lt;"),
    )
    controller = replace(
        TUNED,
        proportional=Proportional(value=1.8, unit="gain", displayed="<b>1.8</b>"),
        recorded_settings=(RecordedSetting(name="<para>", value=HOSTILE, unit="<u>"),),
    )
    view, curves, _ = submission(
        loop=loop,
        controller=controller,
        reason=HOSTILE,
        safety_effect=HOSTILE,
        tool=Tool(name=HOSTILE, version="<"),
    )
    signed = decided(view, reason=HOSTILE, meaning=HOSTILE, deviation=(replace(DEVIATION, reason=HOSTILE),))
    return content_of(signed, curves)


def long_texts() -> SheetContent:
    loop = replace(
        LOOP, tag="W" * 60, site="W" * 60, description=UNBROKEN, area=UNBROKEN, service_class=UNBROKEN
    )
    settings = tuple(RecordedSetting(name="N" * 80, value="v" * 200, unit="u" * 80) for _ in range(40))
    controller = replace(
        TUNED,
        proportional=Proportional(value=1.8, unit="gain", displayed="8" * 80),
        recorded_settings=settings,
    )
    view, curves, before = submission(
        loop=loop, controller=controller, reason="r" * 4000, safety_effect="a\n" * 2000
    )
    view = decided(view, reason="q" * 4000, deviation=(replace(DEVIATION, reason="x" * 4000),))
    return content_of(view, curves, curves_in_force=before)


def many_findings() -> SheetContent:
    view, curves, before = submission()
    signed = view.content.recomputations[0]
    answer = signed.answer
    answer = replace(answer, findings=(*answer.criteria, *answer.own_findings * 8))
    view = replace(view, content=replace(view.content, recomputations=(replace(signed, answer=answer),)))
    return content_of(view, curves, curves_in_force=before)


def foreign_letters() -> SheetContent:
    loop = replace(LOOP, tag="流量-101", description="流量控制 مضخة, é Ω €", area="Сушка")
    view, curves, before = submission(loop=loop, reason="原因: תיקון \U0001f600")
    return content_of(view, curves, curves_in_force=before)


def level() -> SheetContent:
    controller = replace(
        TUNED,
        proportional=Proportional(value=40.0, unit="percent_band"),
        integral=IntegralTime(value=20.0, unit="minutes"),
        derivative=None,
        derivative_filter=None,
    )
    view, curves, _ = submission(plants=(LEVEL,), controller=controller, earlier=None)
    return content_of(decided(view), curves)


def runaway() -> SheetContent:
    view, curves, _ = submission(
        plants=(RUNAWAY,), controller=replace(EARLIER, action="reverse"), earlier=None
    )
    return content_of(view, curves)


def unknowns() -> SheetContent:
    weighted = replace(
        EARLIER,
        setpoint_weight=SetpointWeight(proportional=0.5),
        measurement_filter_s=2.0,
        integral=IntegralTime(value=1.5, unit="minutes", displayed="0 1.5"),
    )
    plant = replace(
        LAG,
        uncertainty=Uncertainty(gain=(0.8, 1.25)),
        identified_through_filter_s=1.0,
        gain_basis="engineering_units",
    )
    view, curves, before = submission(controller=PARALLEL_UNKNOWNS, earlier=weighted, plants=(plant,))
    return content_of(view, curves, curves_in_force=before)


def filter_by_ratio() -> SheetContent:
    controller = replace(TUNED, derivative_filter=DerivativeFilter(value=8.0, unit="ratio", displayed="8"))
    view, curves, before = submission(controller=controller, earlier=TUNED)
    return content_of(decided(view, "reject"), curves, curves_in_force=before)


CASES: dict[str, Callable[[], SheetContent]] = {
    case.__name__: case
    for case in (
        ordinary,
        in_force,
        unstable,
        below_the_hard_floor,
        undecided,
        two_zeros,
        gain_sets,
        twenty_sets,
        no_earlier_gains,
        no_model,
        hostile,
        long_texts,
        many_findings,
        foreign_letters,
        level,
        runaway,
        unknowns,
        filter_by_ratio,
    )
}
