"""The chart of a step response: PV above, controller output below, the same time under both."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from reportlab.graphics.shapes import Drawing
from reportlab.lib.colors import HexColor

from service.analysis.results import Curves, LoadStep, Quantity, Recomputation, ResponseCurve, SetpointStep
from service.figures import fonts, ticks, window
from service.figures.panel import QUIET, Panel, Scale, Stroke, drawn, legend, text
from service.figures.polyline import Point
from service.judgement.quantities import judged

THESE = Stroke(HexColor(0x0B2E6F), 1.5)
EARLIER = Stroke(HexColor(0xB04A00), 1.2, (5, 3))
SETPOINT = Stroke(HexColor(0x000000), 0.8, (1, 2))
BAND = Stroke(HexColor(0xDEDEDE), 5.0)
BAND_EDGE = Stroke(HexColor(0x808080), 0.5)
MOMENT = Stroke(QUIET, 0.8, (3, 2))

PV_HEADING = "PV, % of range"
RECOVERY_BAND_PERCENT = 5.0
"""Of the peak deviation: the band in which `LoadStep.recovery_time_s` is counted."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Response:
    """A stored step response with its metrics; `earlier` is that of the gains in force beside it."""

    step: Literal["setpoint", "load"]
    curve: ResponseCurve
    metrics: SetpointStep | LoadStep
    settling_band_percent: float = 2.0
    earlier: ResponseCurve | None = None
    name: str = "proposed gains"
    earlier_name: str = "gains in force"

    @property
    def title(self) -> str:
        """What was done to the loop."""
        if self.step == "setpoint":
            return "Set-point step of 1 % of range"
        return "Load step of 1 % at the controller output"

    @property
    def settled_s(self) -> Quantity:
        """When PV is in its band for good, in seconds."""
        if isinstance(self.metrics, SetpointStep):
            return self.metrics.settling_time_s
        return self.metrics.recovery_time_s

    @property
    def band(self) -> tuple[float, float] | None:
        """Low and high end of the band in which PV counts as settled."""
        final, share = number(self.metrics.final_value), self.settling_band_percent
        reference = final
        if isinstance(self.metrics, LoadStep):
            reference, share = number(self.metrics.peak_deviation), RECOVERY_BAND_PERCENT
        if final is None or not reference:
            return None
        half = abs(reference) * share / 100
        return final - half, final + half

    @property
    def band_name(self) -> str:
        """What the band lines are."""
        if self.step == "setpoint":
            return f"±{self.settling_band_percent:g} % band"
        return f"±{RECOVERY_BAND_PERCENT:g} % of the peak"


def number(quantity: Quantity) -> float | None:
    """The quantity where it is a number."""
    return None if quantity is None or quantity == "unbounded" else quantity


def stored_responses(
    recomputation: Recomputation,
    curves: Curves,
    *,
    earlier: Curves | None = None,
    settling_band_percent: float = 2.0,
    name: str = "proposed gains",
    earlier_name: str = "gains in force",
) -> tuple[Response, ...]:
    """Those of the two step responses that were computed and stored, each with that of the gains in force."""
    analysis = judged(recomputation)
    if analysis is None:
        return ()
    found = (
        ("setpoint", curves.setpoint, analysis.setpoint_step, earlier.setpoint if earlier else None),
        ("load", curves.load, analysis.load_step, earlier.load if earlier else None),
    )
    return tuple(
        Response(
            step=step,  # type: ignore[arg-type]  # the literals above, widened by the tuple
            curve=curve,
            metrics=metrics,
            settling_band_percent=settling_band_percent,
            earlier=before,
            name=name,
            earlier_name=earlier_name,
        )
        for step, curve, metrics, before in found
        if curve is not None and metrics is not None
    )


def response_drawing(
    response: Response, *, width_pt: int = 520, height_pt: int = 380, text_pt: float = 10.0
) -> Drawing:
    """The chart of one step response, `width_pt` by `height_pt` points."""
    fonts.register()
    drawing = Drawing(width_pt, height_pt)
    end_s = window.horizon_s(response.curve, response.earlier)
    unit = ticks.time_unit(end_s)
    names, foot_pt = legend(2, height_pt - 2.7 * text_pt, _entries(response), text_pt, width_pt - 4)
    x = Scale(0.0, end_s / unit.seconds, 4.6 * text_pt, width_pt - 1.8 * text_pt)
    pv, output = _panels(response, end_s, x, foot_pt - 2.2 * text_pt, text_pt)
    drawing.add(text(2, height_pt - 1.2 * text_pt, response.title, text_pt, bold=True))
    drawing.add(names)
    drawing.add(pv.frame(PV_HEADING, None))
    drawing.add(output.frame("Controller output, % of its range", f"Time after the step, {unit.name}"))
    _draw_pv(drawing, pv, response, unit)
    _draw_output(drawing, output, response, unit, end_s)
    return drawing


def _panels(
    response: Response, end_s: float, x: Scale, head_pt: float, text_pt: float
) -> tuple[Panel, Panel]:
    """PV's panel and the output's, in the shares 3 to 2 of the height below `head_pt`."""
    foot, between = 3.2 * text_pt, 2.2 * text_pt
    middle = foot + 0.4 * (head_pt - foot - between)
    pv = window.limits(_pv_values(response, end_s))
    output = window.limits(_output_values(response, end_s))
    return (
        Panel(x, Scale(*pv, middle + between, head_pt), text_pt),
        Panel(x, Scale(*output, foot, middle), text_pt),
    )


def _pv_values(response: Response, end_s: float) -> list[float]:
    values = [0.0, *(response.band or ()), *window.shown_until(response.curve, response.curve.pv, end_s)]
    if response.step == "setpoint":
        values.append(1.0)
    if response.earlier is None:
        return values
    return window.with_earlier(values, window.shown_until(response.earlier, response.earlier.pv, end_s))


def _output_values(response: Response, end_s: float) -> list[float]:
    values, _ = window.output_values(response.curve, end_s)
    if response.earlier is None:
        return values
    return window.with_earlier(values, window.shown_until(response.earlier, response.earlier.output, end_s))


def _entries(response: Response) -> list[tuple[str, Stroke]]:
    entries = [(response.name, THESE)]
    if response.earlier:
        entries.append((response.earlier_name, EARLIER))
    if response.step == "setpoint":
        entries.append(("set point", SETPOINT))
    if response.band:
        entries.append((response.band_name, BAND))
    return entries


def _draw_pv(drawing: Drawing, panel: Panel, response: Response, unit: ticks.TimeUnit) -> None:
    if response.band:
        drawing.add(panel.strip(*response.band, BAND.colour))
        for edge in response.band:
            drawing.add(panel.level(edge, BAND_EDGE))
    if response.step == "setpoint":
        drawing.add(panel.level(1.0, SETPOINT))
    if response.earlier:
        drawing.add(panel.line(_points(response.earlier.time_s, response.earlier.pv, unit), EARLIER))
    drawing.add(panel.line(_points(response.curve.time_s, response.curve.pv, unit), THESE))
    _draw_settled(drawing, panel, response, unit)


def _draw_settled(drawing: Drawing, panel: Panel, response: Response, unit: ticks.TimeUnit) -> None:
    """A line where PV has settled, named above the panel; a word at the edge where that lies outside."""
    settled_s = number(response.settled_s)
    if settled_s is None or response.band is None:
        return
    foot = panel.y.end_pt + 0.45 * panel.text_pt
    if settled_s / unit.seconds > panel.x.high:
        words = "settles beyond this chart →"
        drawing.add(text(panel.x.end_pt, foot, words, panel.text_pt, anchor="end"))
        return
    x = panel.x.at(settled_s / unit.seconds)
    drawing.add(drawn([(x, panel.y.start_pt), (x, panel.y.end_pt)], MOMENT))
    # the name stays clear of the heading at the left and of the paper's edge at the right
    half = fonts.width_pt("settled", fonts.REGULAR, panel.text_pt) / 2
    heading_end = panel.x.start_pt + fonts.width_pt(PV_HEADING, fonts.REGULAR, panel.text_pt)
    middle = min(max(x, heading_end + panel.text_pt + half), panel.x.end_pt - half)
    drawing.add(text(middle, foot, "settled", panel.text_pt, anchor="middle"))


def _draw_output(
    drawing: Drawing, panel: Panel, response: Response, unit: ticks.TimeUnit, end_s: float
) -> None:
    if response.earlier:
        drawing.add(panel.line(_points(response.earlier.time_s, response.earlier.output, unit), EARLIER))
    drawing.add(panel.line(_points(response.curve.time_s, response.curve.output, unit), THESE))
    _, cut = window.output_values(response.curve, end_s)
    if cut:
        words = "the first peak leaves this chart"
        height = panel.y.end_pt - 1.3 * panel.text_pt
        drawing.add(text(panel.x.end_pt - 3, height, words, panel.text_pt, anchor="end"))


def _points(time_s: Sequence[float], values: Sequence[float], unit: ticks.TimeUnit) -> list[Point]:
    return [(t / unit.seconds, value) for t, value in zip(time_s, values, strict=True)]
