"""The checkpoint of the history that a program gets with each decision, as a file to be kept elsewhere."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from service.app import create_app
from service.context import services
from service.issuing import signing_keys
from service.settings import Settings
from service.verification.checkpoints import Checkpoint
from service.verification.verifier import verify
from tests.api.conftest import CHEAP, SECRET_KEY, Decide, Kept, Service, password_of
from tests.api.plant import LOOP, MODEL, SUBMISSION, Body
from tests.api.test_changes import PROPOSAL
from tests.api.test_changes import decide as decide_change
from tests.databases import Databases


def test_a_decision_has_the_checkpoint_that_was_made_with_it(
    service: Service, submission: Body, decide: Decide
) -> None:
    made = decide().json
    checkpoint = made["checkpoint"]
    assert (checkpoint["size"], checkpoint["head"]) == (made["entry"]["number"], made["entry"]["digest"])
    assert (checkpoint["public_key"], checkpoint["signature"]) == (None, None)
    shown = service.get(f"/v1/submissions/{submission['id']}").json
    assert [each["checkpoint"] for each in shown["decisions"]] == [checkpoint]
    told = service.get("/v1/history?kind=sheet_kept", "auditor").json["items"]
    assert [each["content"]["checkpoint"] for each in told] == [checkpoint]


@pytest.mark.parametrize(
    ("decision", "person"), [("confirm", "reviewer"), ("reject", "reviewer"), ("withdraw", "submitter")]
)
def test_so_has_a_decision_on_a_change_of_a_loop(
    service: Service, loop_id: str, decision: str, person: str
) -> None:
    change = service.post(f"/v1/loops/{loop_id}/changes", PROPOSAL).json
    assert change["decision"] is None
    answer = decide_change(service, change, decision, person)
    made = answer.json["decision"]
    checkpoint = made["checkpoint"]
    assert (checkpoint["size"], checkpoint["head"]) == (made["entry"]["number"], made["entry"]["digest"])
    assert service.get(f"/v1/changes/{change['id']}").json["decision"] == made
    (told,) = service.get("/v1/history?kind=checkpoint_kept", "auditor").json["items"]
    assert told["content"] == {"change_id": change["id"], "checkpoint": checkpoint}


def test_with_a_key_it_is_signed_and_verifies_as_it_came(
    kept: Kept, databases: Databases, tmp_path: Path
) -> None:
    file = tmp_path / "signing.pem"
    file.write_bytes(signing_keys.make())
    url = databases.copy_of(kept.url)
    settings = Settings(database_url=url, secret_key=SECRET_KEY, signing_key_file=file)
    app = create_app(settings, password_hasher=CHEAP)
    service = Service(app, url, kept.tokens)
    loop = service.post("/v1/loops", LOOP).json["id"]
    service.post(f"/v1/loops/{loop}/models", MODEL)
    submission = service.post("/v1/submissions", SUBMISSION).json
    body = {
        "decision": "reject",
        "reason": "not now",
        "content_digest": submission["content_digest"],
        "password": password_of("reviewer"),
        "deviation": [],
    }
    made = service.post(f"/v1/submissions/{submission['id']}/decisions", body, "reviewer").json
    change = service.post(f"/v1/loops/{loop}/changes", PROPOSAL).json
    confirmed = decide_change(service, change).json["decision"]
    held = Checkpoint.read(json.dumps(made["checkpoint"]).encode())
    with app.app_context():
        services().database.close()
    of_change = Checkpoint.read(json.dumps(confirmed["checkpoint"]).encode())
    for each in (held, of_change):
        report = verify(url, checkpoint=each, held_key=each.public_key)
        assert report.holds
        assert each.is_signed
        assert f"Signed by the key {each.public_key}, verified: 2" in " ".join(report.signatures)
    databases.drop(url)
