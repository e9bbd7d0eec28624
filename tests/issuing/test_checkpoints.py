"""A checkpoint says how far the history reaches; its signature is checked here by other means."""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Iterator
from pathlib import Path

import pytest
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey
from cryptography.hazmat.primitives.asymmetric.rsa import generate_private_key
from cryptography.hazmat.primitives.serialization import (
    BestAvailableEncryption,
    Encoding,
    NoEncryption,
    PrivateFormat,
)

from service.documents import reading, writing
from service.documents.loops import LoopRegistration
from service.issuing.checkpoints import Checkpoint, UnusableKey, checkpoint, read_key
from service.records import history_queries, loops, migrating
from service.records.database import Database, system_clock
from service.records.history_queries import HistoryFilter
from service.records.roles import CONSOLE
from tests.api.plant import LOOP
from tests.databases import Databases


@pytest.fixture
def database(databases: Databases) -> Iterator[Database]:
    url = databases.new()
    migrating.migrate(url, now=system_clock())
    database = Database.open(url)
    with database.writing() as session:
        for number in range(4):
            document = reading.read(LoopRegistration, LOOP | {"tag": f"TIC-30{number}"})
            loops.register(session, CONSOLE, document, database.now())
    yield database
    database.close()
    databases.drop(url)


def made(database: Database, key: Ed25519PrivateKey | None) -> Checkpoint:
    with database.reading() as session:
        return checkpoint(session, key)


def leaves(database: Database) -> list[bytes]:
    with database.reading() as session:
        page = history_queries.history(session, CONSOLE, HistoryFilter(), None, 100)
    return [hashlib.sha256(b"\x00" + entry.canonical).digest() for entry in page.items]


def merkle_root(hashes: list[bytes]) -> bytes:
    """Return the root by the recursive definition of RFC 9162, section 2.1.1."""
    if len(hashes) == 1:
        return hashes[0]
    split = 1
    while split * 2 < len(hashes):
        split *= 2
    return hashlib.sha256(b"\x01" + merkle_root(hashes[:split]) + merkle_root(hashes[split:])).digest()


def signed_bytes(given: Checkpoint) -> bytes:
    """Return what the signature covers; for texts, whole numbers and null this is RFC 8785's form too."""
    plain = writing.plain(given)
    assert isinstance(plain, dict)
    del plain["signature"]
    return json.dumps(plain, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()


def test_a_checkpoint_holds_the_root_over_all_entries(database: Database) -> None:
    given, hashes = made(database, None), leaves(database)
    assert given.size == len(hashes) == 5
    assert given.digest == merkle_root(hashes).hex()
    assert (given.origin, given.head) == (hashes[0].hex(), hashes[-1].hex())


def test_without_a_key_a_checkpoint_says_that_it_is_unsigned(database: Database) -> None:
    given = made(database, None)
    assert (given.signature, given.public_key) == (None, None)


def test_the_signature_holds_for_what_is_said_and_for_nothing_else(database: Database) -> None:
    key = Ed25519PrivateKey.generate()
    given = made(database, key)
    assert given.signature is not None
    assert given.public_key is not None
    public = Ed25519PublicKey.from_public_bytes(base64.b64decode(given.public_key))
    signature = base64.b64decode(given.signature)
    public.verify(signature, signed_bytes(given))
    with pytest.raises(InvalidSignature):
        public.verify(signature, signed_bytes(given).replace(b'"size":5', b'"size":4'))


def test_a_key_file_is_read_and_another_kind_of_file_is_refused(tmp_path: Path) -> None:
    file = tmp_path / "key.pem"
    form = (Encoding.PEM, PrivateFormat.PKCS8, NoEncryption())
    key = Ed25519PrivateKey.generate()
    file.write_bytes(key.private_bytes(*form))
    assert read_key(file).public_key() == key.public_key()
    file.write_bytes(generate_private_key(65537, 2048).private_bytes(*form))
    with pytest.raises(UnusableKey, match="another kind"):
        read_key(file)
    with pytest.raises(UnusableKey, match="No such file"):
        read_key(tmp_path / "none.pem")


def test_a_key_file_without_a_key_or_with_a_locked_one_is_refused(tmp_path: Path) -> None:
    locked = Ed25519PrivateKey.generate().private_bytes(
        Encoding.PEM, PrivateFormat.PKCS8, BestAvailableEncryption(b"a passphrase")
    )
    for raw in (b"", b"no key at all", b"\xff\x00", locked):
        file = tmp_path / "key.pem"
        file.write_bytes(raw)
        with pytest.raises(UnusableKey, match="no unencrypted private key in PEM"):
            read_key(file)
