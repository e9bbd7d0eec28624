"""An example of each document that is read, on an invented plant.

The API description shows them, and tests read them.
"""

from __future__ import annotations

from typing import Any

from service.documents.changes import ChangeDecisionRequest, LoopChangeRequest
from service.documents.decisions import DecisionRequest
from service.documents.installations import InstallationRequest
from service.documents.loops import LoopRegistration, ModelVersion, RevisedLoop
from service.documents.people import (
    AccessRequest,
    AccountRequest,
    FullNameRequest,
    PasswordChangeRequest,
    PasswordResetRequest,
    ReasonRequest,
    TokenRequest,
)
from service.documents.recomputations import RecomputationRequest
from service.documents.submissions import SubmissionRequest

_PLANT_MODEL: dict[str, Any] = {
    "kind": "first_order",
    "gain": 1.2,
    "time_constant_s": 95.0,
    "dead_time_s": 14.0,
}
_AS_FOUND: dict[str, Any] = {
    "form": "ideal",
    "action": "reverse",
    "proportional": {"value": 180.0, "unit": "percent_band", "displayed": "180.0"},
    "integral": {"value": 0.5, "unit": "repeats_per_minute", "displayed": "0.50"},
    "derivative": None,
    "derivative_filter": None,
    "measurement_filter_s": 2.0,
    "setpoint_weight": {"proportional": 1.0, "derivative": 0.0},
    "scan": None,
    "algorithm": "incremental",
    "recorded_settings": [{"name": "output high limit", "value": 95, "unit": "%"}],
}
_AS_LEFT: dict[str, Any] = _AS_FOUND | {
    "proportional": {"value": 55.0, "unit": "percent_band", "displayed": "55.0"},
    "integral": {"value": 0.7, "unit": "repeats_per_minute", "displayed": "0.70"},
}
_LOOP: dict[str, Any] = {
    "site": "Hillside works",
    "tag": "TIC-4012",
    "description": "Outlet temperature of the wash heater",
    "area": "Washing",
    "pv": {"low": 0, "high": 150, "unit": "°C"},
    "output": {"low": 0, "high": 100, "unit": "%"},
    "criteria": {"gain_margin_min": 2.5, "phase_margin_deg_min": 45},
    "fail_position": "closed",
}

EXAMPLES: dict[type, dict[str, Any]] = {
    RecomputationRequest: {
        "plant_model": _PLANT_MODEL,
        "controller": _AS_LEFT,
        "criteria": {"gain_margin_min": 2.5, "phase_margin_deg_min": 45, "overshoot_percent_max": 15},
        "claims": {"gain_margin": 4.3, "phase_margin_deg": 66},
    },
    LoopRegistration: _LOOP,
    RevisedLoop: _LOOP | {"reason": "The description named the line that was taken down in spring."},
    ModelVersion: {
        "plant_model": _PLANT_MODEL,
        "operating_point": "normal feed",
        "evidence": "Two steps of the output, 4 % up and 4 % down, at steady feed.",
    },
    SubmissionRequest: {
        "loop": {"site": "Hillside works", "tag": "TIC-4012"},
        "kind": "planned",
        "controller": _AS_LEFT,
        "reason": "Returns too slowly after a change of feed.",
        "safety_effect": "None: the high temperature trip acts on a sensor of its own.",
        "claims": {"gain_margin": 4.3, "phase_margin_deg": 66},
        "tool": {"name": "loop helper", "version": "2.4"},
    },
    LoopChangeRequest: {
        "revision": 1,
        "reason": "The transmitter was ranged anew for the new heater; work order 5-118.",
        "loop": _LOOP | {"pv": {"low": 0, "high": 200, "unit": "°C"}},
    },
    ChangeDecisionRequest: {
        "decision": "confirm",
        "reason": "Read against the data sheet of the transmitter.",
        "content_digest": "5b0e6f6a" * 8,
        "password": "the password of whoever signs",
    },
    AccountRequest: {
        "name": "m.okafor",
        "full_name": "Mina Okafor",
        "roles": ["submitter"],
        "areas": ["Washing"],
        "new_password": "fifteen characters or more",
    },
    AccessRequest: {
        "roles": ["submitter", "reviewer"],
        "areas": ["Washing", "Drying"],
        "reason": "Reviews for the day shift from May on.",
    },
    FullNameRequest: {"full_name": "Mina Okafor-Lind", "reason": "Married."},
    ReasonRequest: {"reason": "Left the site."},
    PasswordResetRequest: {
        "new_password": "fifteen characters or more",
        "reason": "Forgotten; asked for in person.",
    },
    PasswordChangeRequest: {
        "present_password": "the password until now",
        "new_password": "fifteen characters or more",
    },
    TokenRequest: {"account": "m.okafor", "note": "tuning tool on the engineering station"},
    DecisionRequest: {
        "decision": "approve",
        "reason": "Margins agree with two independent step tests.",
        "content_digest": "5b0e6f6a" * 8,
        "password": "the password of whoever signs",
        "deviation": [
            {"criterion": "phase_margin_deg_min", "reason": "43° at the lowest feed, which is run in manual."}
        ],
    },
    InstallationRequest: {
        "as_found": _AS_FOUND,
        "as_left": _AS_LEFT,
        "installed_at": "2027-01-12T09:40:00Z",
        "typed_by": "M. Okafor",
        "read_back_by": "L. Brandt",
        "operator": "day shift",
        "saved_to_engineering_database": True,
    },
}
