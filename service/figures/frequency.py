"""The chart of a loop over frequency: abs L and abs S, both axes logarithmic."""

from __future__ import annotations

from collections.abc import Sequence

from reportlab.graphics.shapes import Drawing
from reportlab.lib.colors import HexColor

from service.analysis.results import FrequencyCurve
from service.figures import fonts
from service.figures.panel import QUIET, Panel, Scale, Stroke, legend, text

LOOP_GAIN = Stroke(HexColor(0x0B2E6F), 1.5)
SENSITIVITY = Stroke(HexColor(0x7A1F00), 1.3, (6, 2.5))
ONE = Stroke(HexColor(0x000000), 0.7, (1, 2))
LIMIT = Stroke(QUIET, 0.7, (7, 2, 1.5, 2))

LOWEST, HIGHEST = 1e-3, 1e3


def frequency_drawing(
    curve: FrequencyCurve,
    *,
    stable: bool = True,
    max_sensitivity_limit: float | None = None,
    width_pt: int = 520,
    height_pt: int = 300,
    text_pt: float = 10.0,
) -> Drawing:
    """The chart of abs L (loop gain) and, of a stable loop, abs S (sensitivity), in points."""
    fonts.register()
    drawing = Drawing(width_pt, height_pt)
    x = Scale(curve.rad_s[0], curve.rad_s[-1], 4.6 * text_pt, width_pt - 1.8 * text_pt, logarithmic=True)
    entries = [("loop gain |L|", LOOP_GAIN)]
    if stable:
        entries.append(("sensitivity |S|", SENSITIVITY))
    if max_sensitivity_limit is not None:
        entries.append((f"limit of |S|, {max_sensitivity_limit:g}", LIMIT))
    names, foot_pt = legend(2, height_pt - 2.7 * text_pt, entries, text_pt, width_pt - 4)
    shown = (*curve.magnitude, *curve.sensitivity) if stable else curve.magnitude
    y = Scale(*_limits(shown), 3.2 * text_pt, foot_pt - 2.2 * text_pt, logarithmic=True)
    panel = Panel(x, y, text_pt)
    drawing.add(names)
    drawing.add(text(2, height_pt - 1.2 * text_pt, title(stable=stable), text_pt, bold=True))
    drawing.add(panel.frame("Magnitude, no unit", "Frequency, rad/s"))
    drawing.add(panel.level(1.0, ONE))
    if max_sensitivity_limit is not None:
        drawing.add(panel.level(max_sensitivity_limit, LIMIT))
    drawing.add(panel.line(list(zip(curve.rad_s, curve.magnitude, strict=True)), LOOP_GAIN))
    if stable:
        drawing.add(panel.line(list(zip(curve.rad_s, curve.sensitivity, strict=True)), SENSITIVITY))
    return drawing


def title(*, stable: bool) -> str:
    """What the chart shows."""
    return "Loop gain and sensitivity over frequency" if stable else "Loop gain over frequency"


def _limits(shown: Sequence[float]) -> tuple[float, float]:
    """Whole decades round all that is shown, but not so many that the crossing at one cannot be seen."""
    values = [value for value in shown if value > 0]
    low, high = LOWEST, HIGHEST
    while low * 10 <= min(values) and low < 0.1:
        low *= 10
    while high / 10 >= max(values) and high > 10:
        high /= 10
    return low, high
