"""The description that the service gives of itself says what it does: checked on the walk's own bodies."""

from __future__ import annotations

import re
from typing import Any, get_args

import jsonschema_rs
import pytest

from service.api.openapi import SAID_OF_QUERIES, routes_of
from service.documents.submissions import KINDS, Kind
from service.records.event_kinds import EventKind
from tests.api import plant
from tests.api.conftest import Decide, Service, password_of
from tests.api.plant import Body, changed, without
from tests.api.test_credentials import api_rules

REQUESTS: dict[str, Body] = {
    "LoopRegistration": plant.LOOP,
    "ModelVersion": plant.MODEL,
    "RecomputationRequest": plant.RECOMPUTATION,
    "SubmissionRequest": plant.SUBMISSION,
    # its time first: as found and as left may be given by set in place of one controller
    "InstallationRequest": {"installed_at": ""} | plant.installed_now(),
}


@pytest.fixture
def description(service: Service) -> Body:
    body: Body = service.get("/v1/openapi.json", person=None).json
    return body


def problems(description: Body, schema: Body, value: object) -> list[str]:
    """Return what is wrong with a value by a schema (2020-12) of the description."""
    validator = jsonschema_rs.Draft202012Validator(schema | {"components": description["components"]})
    return [str(error) for error in validator.iter_errors(value)]


def answer_schema(description: Body, path: str, method: str = "get", status: str = "200") -> Body:
    content = description["paths"][path][method]["responses"][status]["content"]
    schema: Body = content["application/json"]["schema"]
    return schema


def test_every_route_that_needs_a_credential_is_described(service: Service, description: Body) -> None:
    described = {(path, method) for path, methods in description["paths"].items() for method in methods}
    routes = {(route.path, route.method) for route in routes_of(service.app)}
    assert described == routes
    assert len(routes) == len(api_rules(service))


def test_no_reference_leads_nowhere(description: Body) -> None:
    def references(part: Any) -> set[str]:
        if isinstance(part, dict):
            own = {part["$ref"]} if isinstance(part.get("$ref"), str) else set()
            return own.union(*(references(value) for value in part.values()))
        return set().union(*(references(value) for value in part)) if isinstance(part, list) else set()

    named = {reference.removeprefix("#/components/schemas/") for reference in references(description)}
    assert len(named) > 40
    assert named <= set(description["components"]["schemas"])


@pytest.mark.parametrize("name", REQUESTS)
def test_the_schemas_let_through_what_the_service_takes_and_no_unknown_field(
    description: Body, name: str
) -> None:
    schema = description["components"]["schemas"][name]
    assert problems(description, schema, REQUESTS[name]) == []
    assert problems(description, schema, REQUESTS[name] | {"colour": "red"}) != []
    first = next(iter(REQUESTS[name]))
    assert problems(description, schema, without(REQUESTS[name], first)) != []


def test_a_wrong_value_deep_inside_is_wrong_by_the_schema_too(description: Body) -> None:
    schema = description["components"]["schemas"]["SubmissionRequest"]
    for pointer, value in (
        ("/controller/proportional/value", -1.0),
        ("/controller/integral/unit", "hours"),
        ("/controller/form", "best"),
    ):
        assert problems(description, schema, changed(plant.SUBMISSION, pointer, value)) != []


def test_what_is_answered_on_the_walk_is_what_is_described(
    service: Service, description: Body, loop_id: str, submission: Body, decide: Decide
) -> None:
    own = f"/v1/submissions/{submission['id']}"
    one = "/v1/submissions/{submission_id}"
    signed = decide()
    mistyped = changed(plant.installed_now(), "/as_left/proportional/value", 20.0)
    otherwise = service.post(f"{own}/installations", mistyped)
    left = service.get(f"/v1/loops/{loop_id}/gains-in-force")
    installed = service.post(f"{own}/installations", plant.installed_now())
    computed = service.post("/v1/recomputations", plant.RECOMPUTATION | {"include": ["curves"]})
    made = [
        (submission, answer_schema(description, "/v1/submissions", "post", "201")),
        (signed.json, answer_schema(description, f"{one}/decisions", "post", "201")),
        (otherwise.json, answer_schema(description, f"{one}/installations", "post", "201")),
        (left.json, answer_schema(description, "/v1/loops/{loop_id}/gains-in-force")),
        (installed.json, answer_schema(description, f"{one}/installations", "post", "201")),
        (computed.json, answer_schema(description, "/v1/recomputations", "post")),
    ]
    read = {
        "/v1/loops": "/v1/loops",
        f"/v1/loops/{loop_id}": "/v1/loops/{loop_id}",
        f"/v1/loops/{loop_id}/revisions": "/v1/loops/{loop_id}/revisions",
        f"/v1/loops/{loop_id}/models": "/v1/loops/{loop_id}/models",
        f"/v1/loops/{loop_id}/gains-in-force": "/v1/loops/{loop_id}/gains-in-force",
        "/v1/submissions": "/v1/submissions",
        own: one,
        f"{own}/curves": f"{one}/curves",
        "/v1/history": "/v1/history",
        "/v1/history/1": "/v1/history/{number}",
        "/v1/history/checkpoint": "/v1/history/checkpoint",
    }
    made += [
        (service.get(path, person="auditor").json, answer_schema(description, template))
        for path, template in read.items()
    ]
    for value, schema in made:
        assert problems(description, schema, value) == []


def test_the_examples_of_the_description_run_from_registration_to_installation(
    service: Service, description: Body
) -> None:
    def example(name: str) -> Body:
        schema = description["components"]["schemas"][name]
        shown: Body = schema["examples"][0]
        return shown

    assert service.post("/v1/recomputations", example("RecomputationRequest")).status_code == 200
    loop = service.post("/v1/loops", example("LoopRegistration"))
    assert service.post(f"{loop.headers['Location']}/models", example("ModelVersion")).status_code == 201
    made = service.post("/v1/submissions", example("SubmissionRequest"))
    assert made.status_code == 201, made.text
    # what the example cannot know: this submission's digest, this password, and that all limits are met
    own = {
        "content_digest": made.json["content_digest"],
        "password": password_of("reviewer"),
        "deviation": [],
    }
    decision = example("DecisionRequest") | own
    signed = service.post(f"{made.headers['Location']}/decisions", decision, person="reviewer")
    assert signed.status_code == 201, signed.text
    # gains are installed after they were submitted, and not in the future: no example can have the time
    installation = example("InstallationRequest") | {"installed_at": plant.installed_now()["installed_at"]}
    installed = service.post(f"{made.headers['Location']}/installations", installation)
    assert installed.status_code == 201, installed.text


def test_a_problem_is_as_described(service: Service, description: Body) -> None:
    schema = description["components"]["schemas"]["Problem"]
    assert problems(description, schema, service.post("/v1/loops", {}).json) == []


@pytest.mark.parametrize(
    ("path", "person", "headers", "status"),
    [
        ("/v1/tokens", "submitter", {}, 403),
        ("/v1/accounts", "reviewer", {}, 403),
        ("/v1/history", "auditor", {"Accept": "image/png"}, 406),
        ("/v1/history/1/inclusion?size=99", "auditor", {}, 422),
        ("/v1/history/consistency?first=98&second=99", "auditor", {}, 422),
    ],
)
def test_what_a_reading_refuses_is_described(
    service: Service, description: Body, path: str, person: str, headers: dict[str, str], status: int
) -> None:
    assert service.get(path, person, headers=headers).status_code == status
    template = path.partition("?")[0].replace("/1/", "/{number}/")
    assert str(status) in description["paths"][template]["get"]["responses"]


def test_what_is_said_of_a_query_parameter_stands_at_one_that_there_is(description: Body) -> None:
    told = {
        parameter["name"]: parameter.get("description")
        for methods in description["paths"].values()
        for operation in methods.values()
        for parameter in operation["parameters"]
        if parameter["in"] == "query"
    }
    assert {name: told[name] for name in SAID_OF_QUERIES} == SAID_OF_QUERIES


def test_every_kind_of_submission_is_explained_wherever_it_stands(description: Body) -> None:
    assert set(KINDS) == set(get_args(get_args(Kind)[0]))
    kinds = [
        schema["properties"]["kind"]
        for schema in description["components"]["schemas"].values()
        if "emergency" in schema.get("properties", {}).get("kind", {}).get("enum", ())
    ]
    assert len(kinds) > 3
    for described in kinds:
        for kind, sentence in KINDS.items():
            assert f"`{kind}`: {sentence}" in described["description"]


def test_a_text_under_a_field_is_its_description(service: Service, description: Body) -> None:
    """Of what is read, of what is written, and of a field that another document refers to."""
    schemas, page = description["components"]["schemas"], service.get("/reference", person=None).text
    for document, name, words in (
        ("SubmissionRequest", "safety_effect", "What the change means for the safety of the process"),
        ("SubmissionRequest", "claims", "to be held against what is recomputed here"),
        ("LoopChangeDecision", "checkpoint", "made with the decision"),
    ):
        assert words in schemas[document]["properties"][name]["description"]
        assert words in page


def test_the_page_of_the_api_sets_names_apart_and_says_what_a_controller_may_be(service: Service) -> None:
    page = service.get("/reference", person=None).text
    assert "<code>planned</code>: Gains that may be installed once they are approved." in page
    _, after = page.split('<h3 id="schema-SubmissionRequest">')
    (of_controller,) = re.findall(r"<code>controller</code></td>.*?</tr>", after, re.DOTALL)[:1]
    assert 'href="#schema-IdealController"' in of_controller


def test_a_kind_of_entry_to_search_for_is_one_of_a_list(description: Body) -> None:
    parameters = description["paths"]["/v1/history"]["get"]["parameters"]
    (kind,) = (each["schema"] for each in parameters if each["name"] == "kind")
    assert [each for each in get_args(EventKind) if problems(description, kind, each)] == []
    assert problems(description, kind, "gains_repealed")


def test_the_page_of_the_api_shows_every_call_and_asks_nothing_off_the_machine(
    service: Service, description: Body
) -> None:
    page = service.get("/reference", person=None)
    assert page.status_code == 200
    for path in description["paths"]:
        assert path in page.text
    assert "<script" not in page.text
    assert "http://" not in page.text
    assert "https://" not in page.text
