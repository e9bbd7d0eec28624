"""An invented loop with its model and gains, as bodies of requests."""

from __future__ import annotations

import copy
from datetime import UTC, datetime
from typing import Any

Body = dict[str, Any]

LOOP: Body = {
    "site": "Vanholm",
    "tag": "TIC-204",
    "description": "Wash water temperature",
    "area": "Washing",
    "pv": {"low": 0.0, "high": 150.0, "unit": "°C"},
    "output": {"low": 0.0, "high": 100.0, "unit": "%"},
}
WHY: Body = {"reason": "The data sheet says otherwise."}
MODEL: Body = {
    "plant_model": {"kind": "first_order", "gain": 1.2, "time_constant_s": 30.0, "dead_time_s": 5.0},
    "operating_point": "normal load",
    "evidence": "Open-loop step of 5 % on 2026-03-02, trend kept with the work order.",
}
CONTROLLER: Body = {
    "form": "ideal",
    "action": "reverse",
    "proportional": {"value": 2.0, "unit": "gain", "displayed": "2.00"},
    "integral": {"value": 30.0, "unit": "seconds"},
    "derivative": None,
    "derivative_filter": None,
    "measurement_filter_s": 0.0,
    "setpoint_weight": {"proportional": 1.0, "derivative": 0.0},
    "scan": None,
}
RECOMPUTATION: Body = {"plant_model": MODEL["plant_model"], "controller": CONTROLLER}
SUBMISSION: Body = {
    "loop": {"site": "Vanholm", "tag": "TIC-204"},
    "kind": "planned",
    "reason": "Slow recovery after a change of load.",
    "safety_effect": "None: the temperature switch is independent of this loop.",
    "controller": CONTROLLER,
    "tool": {"name": "bench script", "version": "1.0"},
    "claims": {"gain_margin": 3.5},
}
INSTALLATION: Body = {
    # installed_at comes from `installed_now`: it lies after the submission
    "as_found": CONTROLLER | {"proportional": {"value": 1.0, "unit": "gain"}},
    "as_left": CONTROLLER,
    "typed_by": "N. Abara",
    "saved_to_engineering_database": True,
}


def installed_now() -> Body:
    """Return an installation that has just been done."""
    return INSTALLATION | {"installed_at": datetime.now(UTC).isoformat()}


def changed(body: Body, pointer: str, value: object) -> Body:
    """Return the body with another value at one place."""
    made = copy.deepcopy(body)
    *above, name = pointer.lstrip("/").split("/")
    place: Any = made
    for step in above:
        place = place[int(step)] if isinstance(place, list) else place[step]
    place[name] = value
    return made


def without(body: Body, name: str) -> Body:
    """Return the body without one of its fields."""
    return {key: value for key, value in body.items() if key != name}
