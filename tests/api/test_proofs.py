"""Whoever holds checkpoints asks for proofs, and checks them with nothing but a hash function."""

from __future__ import annotations

from service.records import merkle
from tests.api import plant
from tests.api.conftest import Service
from tests.api.plant import Body
from tests.records.test_merkle import consistency_holds, inclusion_holds


def _raw(body: Body, *names: str) -> list[bytes]:
    return [bytes.fromhex(body[name]) for name in names]


def test_an_entry_is_proven_to_be_among_those_of_a_checkpoint(service: Service, submission: Body) -> None:
    checkpoint = service.get("/v1/history/checkpoint").json
    number = service.get("/v1/history?kind=gains_submitted").json["items"][0]["number"]
    canonical = service.get(f"/v1/history/{number}").json["canonical"]
    proof = service.get(f"/v1/history/{number}/inclusion", query_string={"size": checkpoint["size"]}).json
    leaf = merkle.leaf_hash(canonical.encode())
    assert (proof["leaf"], proof["root"]) == (leaf.hex(), checkpoint["digest"])
    path = [bytes.fromhex(each) for each in proof["path"]]
    root = bytes.fromhex(checkpoint["digest"])
    assert inclusion_holds(leaf, number - 1, checkpoint["size"], path, root)


def test_an_earlier_checkpoint_is_proven_to_begin_a_later_one(service: Service, loop_id: str) -> None:
    first = service.get("/v1/history/checkpoint").json
    service.post("/v1/loops", plant.LOOP | {"tag": "PIC-1"})
    second = service.get("/v1/history/checkpoint").json
    assert second["size"] == first["size"] + 1
    sizes = {"first": first["size"], "second": second["size"]}
    proof = service.get("/v1/history/consistency", query_string=sizes).json
    assert (proof["first_root"], proof["second_root"]) == (first["digest"], second["digest"])
    old, new = _raw(proof, "first_root", "second_root")
    path = [bytes.fromhex(each) for each in proof["path"]]
    assert consistency_holds(first["size"], second["size"], old, new, path)


def test_without_a_size_a_proof_reaches_to_the_present_end(service: Service, loop_id: str) -> None:
    checkpoint = service.get("/v1/history/checkpoint").json
    size, root = checkpoint["size"], checkpoint["digest"]
    for number in (1, 2, size):
        proof = service.get(f"/v1/history/{number}/inclusion", "auditor").json
        leaf, whole, *path = _raw(proof, "leaf", "root") + [bytes.fromhex(each) for each in proof["path"]]
        assert (proof["number"], proof["size"], proof["root"]) == (number, size, root)
        assert inclusion_holds(leaf, number - 1, size, path, whole)
        assert len(path) == 1 or not inclusion_holds(leaf, number % size, size, path, whole)
    for first in (1, 3, size):
        proof = service.get(f"/v1/history/consistency?first={first}").json
        assert (proof["first"], proof["second"], proof["second_root"]) == (first, size, root)
        old, new = _raw(proof, "first_root", "second_root")
        assert consistency_holds(first, size, old, new, [bytes.fromhex(each) for each in proof["path"]])


def test_a_size_that_the_history_does_not_have_is_refused_by_name(service: Service, loop_id: str) -> None:
    size = service.get("/v1/history/checkpoint").json["size"]
    number = service.get("/v1/history?kind=loop_registered").json["items"][0]["number"]
    for path, pointer in (
        (f"/v1/history/{number}/inclusion?size={size + 1}", "/size"),
        (f"/v1/history/{number}/inclusion?size={number - 1}", "/size"),
        (f"/v1/history/consistency?first=1&second={size + 1}", "/second"),
        ("/v1/history/consistency?first=3&second=2", "/first"),
    ):
        answer = service.get(path)
        assert answer.status_code == 422, path
        assert [error["pointer"] for error in answer.json["errors"]] == [pointer]


def test_an_entry_out_of_sight_is_not_proven(service: Service) -> None:
    assert service.get("/v1/history/2/inclusion", person="submitter").status_code == 404
    assert service.get("/v1/history/2/inclusion", person="auditor").status_code == 200
