"""An invented plant in a real store: loops, models and submissions of every kind that a page has to show."""

from __future__ import annotations

import copy
from dataclasses import dataclass
from typing import Any

from argon2 import PasswordHasher
from flask import Flask

from service.app import create_app
from service.context import services
from service.records import accounts, migrating, tokens
from service.records.accounts import NewAccount
from service.records.database import Database, system_clock
from service.records.roles import CONSOLE, Role
from service.settings import Settings

Body = dict[str, Any]

SECRET_KEY = "a secret of the tests, of 32 bytes or more"
CHEAP = PasswordHasher(time_cost=1, memory_cost=8, parallelism=1)
"""The real Argon2id, with a cost at which a test does not wait."""

PEOPLE: dict[str, tuple[str, tuple[Role, ...], tuple[str, ...]]] = {
    "author": ("Ada Thorne", ("submitter",), ()),
    "reviewer": ("Bo Lindgren", ("reviewer",), ()),
    "second": ("Cara Novak", ("reviewer",), ()),
    "both": ("Dov Peretz", ("submitter", "reviewer"), ()),
    "auditor": ("Eli Sandoval", ("auditor",), ()),
    "administrator": ("Fay Okoye", ("administrator",), ()),
    "elsewhere": ("Gus Hartmann", ("submitter", "reviewer"), ("Tank farm",)),
}
"""Account → full name, roles, areas."""

LOUD = "<script>alert('1')</script> & <b>bold</b> \"quoted\""
"""A text that would act, were it not escaped."""

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
    "recorded_settings": [{"name": "output high limit", "value": 95.0, "unit": "%"}],
}
LAG: Body = {"kind": "first_order", "gain": 1.2, "time_constant_s": 30.0, "dead_time_s": 5.0}
TANK: Body = {"kind": "integrating", "gain_per_s": 0.004}


@dataclass(frozen=True)
class Case:
    """One loop with the submission that is read on it."""

    tag: str
    controller: Body
    plant: Body
    loop: Body
    submission: Body


def with_gain(value: float, displayed: str) -> Body:
    return CONTROLLER | {"proportional": {"value": value, "unit": "gain", "displayed": displayed}}


CASES = {
    "stable": Case(
        "TIC-204", CONTROLLER, LAG, {}, {"claims": {"gain_margin": 9.5, "phase_margin_deg": 67.0}}
    ),
    "unstable": Case("FIC-205", with_gain(14.0, "14.0"), LAG, {}, {}),
    "undecided": Case("LIC-206", CONTROLLER | {"proportional": None}, TANK, {}, {}),
    "not_met": Case("PIC-207", CONTROLLER, LAG, {"criteria": {"gain_margin_min": 6.0}}, {}),
    "safety": Case("TIC-208", CONTROLLER, LAG, {"safety_related": True}, {}),
    "loud": Case(
        "AIC-209",
        CONTROLLER,
        LAG,
        {"description": LOUD, "service_class": LOUD},
        {"reason": LOUD, "safety_effect": LOUD, "tool": {"name": LOUD, "version": LOUD}},
    ),
    "long": Case(
        "TIC-210",
        CONTROLLER,
        LAG,
        {"description": "W" * 200},
        {"reason": "reason without a single space ".replace(" ", "_") * 60},
    ),
    "without_model": Case("TIC-211", CONTROLLER, {}, {}, {}),
    "emergency": Case("TIC-214", CONTROLLER, LAG, {}, {"kind": "emergency"}),
    "own_of_both": Case("TIC-212", CONTROLLER, LAG, {}, {}),
    "two_zeros": Case(
        "TIC-213",
        {key: CONTROLLER[key] for key in ("action", "measurement_filter_s", "scan")}
        | {
            "form": "two_zeros",
            "gain": 1.5,
            "zeros_rad_s": [-0.05, -0.2],
            "derivative_filter": {"value": 0.5, "unit": "seconds"},
            "setpoint_weight": {"proportional": 1.0, "derivative": 0.0},
        },
        LAG,
        {},
        {},
    ),
}


@dataclass(frozen=True)
class Kept:
    """A store, and the identifiers of what was put into it."""

    url: str
    loops: dict[str, str]
    submissions: dict[str, str]


def password_of(person: str) -> str:
    return f"correct battery of {person}"


def application(url: str) -> Flask:
    settings = Settings(database_url=url, secret_key=SECRET_KEY)
    return create_app(settings, password_hasher=CHEAP)


def close(app: Flask) -> None:
    with app.app_context():
        services().database.close()


def make_store(url: str, *, demonstration: bool = False) -> Kept:
    """Make the store by the migrations and fill it through the interface, as a tool would."""
    migrating.migrate(url, now=system_clock(), demonstration=demonstration)
    database = Database.open(url, password_hasher=CHEAP)
    with database.writing() as session:
        issued = {person: _account(session, database, person) for person in PEOPLE}
    database.close()
    app = application(url)
    made = {name: _fill(app, case, issued, name) for name, case in CASES.items()}
    close(app)
    loops = {name: loop for name, (loop, _) in made.items()}
    return Kept(url, loops, {name: submission for name, (_, submission) in made.items()})


def _account(session: Any, database: Database, person: str) -> str:
    full_name, roles, areas = PEOPLE[person]
    new = NewAccount(name=person, full_name=full_name, roles=roles, areas=areas, password=password_of(person))
    accounts.add(session, CONSOLE, new, database.now())
    return tokens.issue(session, CONSOLE, person, "tests", database.now())[1]


def _fill(app: Flask, case: Case, issued: dict[str, str], name: str) -> tuple[str, str]:
    headers = {"Authorization": f"Bearer {issued['both' if name == 'own_of_both' else 'author']}"}

    def post(path: str, body: Body) -> str:
        answer = app.test_client().post(path, json=body, headers=headers)
        assert answer.status_code == 201, answer.text
        identifier: str = answer.json["id"]
        return identifier

    loop = post("/v1/loops", _loop(case))
    if case.plant:
        model = {"plant_model": case.plant, "operating_point": "normal load", "evidence": "Two output steps."}
        post(f"/v1/loops/{loop}/models", model)
    earlier = copy.deepcopy(case.controller)
    if earlier.get("proportional"):
        earlier["proportional"] |= {"value": 1.6, "displayed": "1.60"}
    post("/v1/submissions", _submission(case.tag, earlier) | {"kind": "baseline"})
    return loop, post("/v1/submissions", _submission(case.tag, case.controller) | case.submission)


def _loop(case: Case) -> Body:
    return {
        "site": "Vanholm",
        "tag": case.tag,
        "description": "Wash water temperature",
        "area": "Washing",
        "pv": {"low": 0.0, "high": 150.0, "unit": "°C"},
        "output": {"low": 0.0, "high": 100.0, "unit": "%"},
    } | case.loop


def _submission(tag: str, controller: Body) -> Body:
    return {
        "loop": {"site": "Vanholm", "tag": tag},
        "kind": "planned",
        "reason": "Slow recovery after a change of load.",
        "safety_effect": "None: the temperature switch is independent of this loop.",
        "controller": controller,
        "tool": {"name": "bench script", "version": "1.0"},
    }
