"""Codes of what an analysis could not compute, as they stand in `Analysis.notes`; the judgement has their
sentences.
"""

MARGINS_TOO_MUCH_WORK = "margins_too_much_work"
"""The dead time makes more crossings than the stated bound; margins are not computed."""

CONTROL_TOO_MUCH_WORK = "control_sensitivity_too_much_work"
"""The supremum of the control sensitivity needs more points than the stated bound; it is not computed."""

NOT_REALISABLE = "responses_not_realisable"
"""An unfiltered derivative acts on a plant that passes a step at once; no response exists."""

TOO_SLOW = "responses_too_slow"
"""The response needs more pieces than the stated bound before it comes to rest."""

IMPULSE = "setpoint_impulse"
"""The unfiltered derivative of a stepped set point is an impulse; the output has no peak and no travel."""

FROM_POINTS = "responses_not_from_points"
"""Points of a frequency response give no step response."""

NUMBERS = "numbers_out_of_range"
"""The loop's numbers leave float64 on the way; what they reach is not computed."""

DELAY_MARGIN = "delay_margin_not_confirmed"
"""Counting the roots beside the delay margin does not confirm it."""
