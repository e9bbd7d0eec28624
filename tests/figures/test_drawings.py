"""What stands on a chart."""

from __future__ import annotations

from dataclasses import replace

import pytest
from reportlab.graphics.shapes import Drawing, Group, PolyLine, String

from service.figures import fonts
from service.figures.frequency import SENSITIVITY, frequency_drawing
from service.figures.responses import EARLIER, THESE, Response, response_drawing
from tests.figures.responses_to_draw import creeping, frequency, load, setpoint, setpoint_metrics


def shapes(group: Drawing | Group, kind: type) -> list:  # type: ignore[type-arg]
    inner = [shape for child in group.contents if isinstance(child, Group) for shape in shapes(child, kind)]
    return [child for child in group.contents if isinstance(child, kind)] + inner


def words(drawing: Drawing) -> set[str]:
    return {shape.text for shape in shapes(drawing, String)}


def test_axes_say_what_they_are_and_in_which_unit() -> None:
    said = words(response_drawing(setpoint()))
    assert {"PV, % of range", "Controller output, % of its range", "Time after the step, s"} <= said
    assert {"Magnitude, no unit", "Frequency, rad/s"} <= words(frequency_drawing(frequency()))


def test_a_sensitivity_is_drawn_for_a_stable_loop_only() -> None:
    assert "sensitivity |S|" in words(frequency_drawing(frequency()))
    not_stable = frequency_drawing(frequency(), stable=False)
    assert "Loop gain over frequency" in words(not_stable)
    assert "sensitivity |S|" not in words(not_stable)
    assert not [line for line in shapes(not_stable, PolyLine) if line.strokeColor == SENSITIVITY.colour]


def test_the_gains_in_force_are_drawn_dashed_beside_the_proposed_ones() -> None:
    drawing = response_drawing(setpoint(earlier=True))
    assert {"proposed gains", "gains in force", "set point", "±2 % band"} <= words(drawing)
    dashed = [line for line in shapes(drawing, PolyLine) if line.strokeColor == EARLIER.colour]
    assert len(dashed) >= 3  # the legend's sample, PV and output
    assert all(line.strokeDashArray for line in dashed)


def test_no_gains_in_force_are_named_where_there_are_none() -> None:
    assert "gains in force" not in words(response_drawing(setpoint()))


def test_a_load_step_has_no_set_point_and_its_own_band() -> None:
    said = words(response_drawing(load()))
    assert "set point" not in said
    assert "±5 % of the peak" in said


def test_the_settling_is_marked_where_it_was_computed() -> None:
    drawing = response_drawing(setpoint(settling_time_s=60.0))
    mark = next(line for line in shapes(drawing, PolyLine) if line.strokeDashArray == [3, 2])
    own = max((line for line in shapes(drawing, PolyLine) if line.strokeColor == THESE.colour), key=_length)
    left, right = own.points[0], own.points[-2]
    assert (mark.points[0] - left) / (right - left) == pytest.approx(60.0 / 100.0, abs=0.01)


def test_a_settling_outside_the_chart_is_said_in_words() -> None:
    slow = Response(
        step="setpoint", curve=creeping(20_000.0), metrics=setpoint_metrics(settling_time_s=3219.0)
    )
    assert "settles beyond this chart →" in words(response_drawing(slow))


@pytest.mark.parametrize("quantity", ["unbounded", None])
def test_a_response_without_a_final_value_is_drawn_without_a_band(quantity: str | None) -> None:
    drawing = response_drawing(setpoint(final_value=quantity, settling_time_s=quantity))
    assert "±2 % band" not in words(drawing)


def test_the_axis_holds_the_highest_stored_point() -> None:
    response = setpoint()
    peak = max(response.curve.pv)
    lifted = replace(response.curve, pv=tuple(3.0 if pv == peak else pv for pv in response.curve.pv))
    assert "3.0" in words(response_drawing(replace(response, curve=lifted)))
    assert "3.0" not in words(response_drawing(response))


def test_no_helvetica_is_named_anywhere() -> None:
    drawn = [response_drawing(setpoint(earlier=True)), frequency_drawing(frequency())]
    names = {shape.fontName for drawing in drawn for shape in shapes(drawing, String)}
    assert names == {fonts.REGULAR, fonts.BOLD}


def test_the_typeface_comes_with_its_licence() -> None:
    licence = (fonts.FOLDER / "LICENSE").read_text()
    assert "Bitstream Vera Fonts Copyright" in licence
    assert "DejaVu changes are in public domain" in licence


def _length(line: PolyLine) -> int:
    return len(line.points)


@pytest.mark.parametrize("factor", [1e-300, 1e-31, 1e250])
def test_frequencies_at_the_end_of_float64_are_drawn_side_by_side(factor: float) -> None:
    usual = frequency()
    curve = replace(usual, rad_s=tuple(value * factor for value in usual.rad_s))
    lines = shapes(frequency_drawing(curve), PolyLine)
    own = next(line for line in lines if line.strokeColor == SENSITIVITY.colour and len(line.points) > 8)
    assert max(own.points[::2]) - min(own.points[::2]) > 300


def test_a_single_frequency_is_drawn_too() -> None:
    usual = frequency()
    one = replace(usual, **{name: getattr(usual, name)[:1] for name in ("rad_s", "magnitude", "phase_deg")})
    frequency_drawing(replace(one, sensitivity=usual.sensitivity[:1]))
