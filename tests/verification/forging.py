"""What a forger does who owns the database and knows the design: everything fits, but for copies outside."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from typing import Any

from tests.verification.conftest import Owned

Forge = Callable[[dict[str, Any], str, str], None]
"""Changes an entry in place; given the root of the entries before it, and the store's origin."""

CHECKPOINTS = {"checkpoints": "decision_id", "change_checkpoints": "change_id"}
"""Tables of checkpoints that were kept with decisions, and what names the decision in each."""


def leaf(raw: bytes) -> bytes:
    return hashlib.sha256(b"\0" + raw).digest()


def root(leaves: list[bytes]) -> bytes:
    """RFC 9162, section 2.1.1: split at the largest power of two below their number."""
    if len(leaves) == 1:
        return leaves[0]
    split = 1 << ((len(leaves) - 1).bit_length() - 1)
    return hashlib.sha256(b"\1" + root(leaves[:split]) + root(leaves[split:])).digest()


def _edge(leaves: list[bytes]) -> bytes:
    """The roots of the perfect subtrees, by the set bits of their number."""
    edge, start = b"", 0
    for bit in reversed(range(len(leaves).bit_length())):
        if len(leaves) >> bit & 1:
            edge += root(leaves[start : start + (1 << bit)])
            start += 1 << bit
    return edge


def set_head(owned: Owned) -> None:
    """Make the head fit the entries, as a forger who knows the design would."""
    entries = owned.rows("SELECT canonical, digest, time FROM history_events ORDER BY number")
    edge = _edge([leaf(raw) for raw, _, _ in entries])
    _, digest, time = entries[-1] if entries else (b"", "0" * 64, None)
    change = "UPDATE history_head SET size = ?, digest = ?, time = ?, right_edge = ?"
    owned.execute((change, (len(entries), digest, time, edge)))


def rewrite_from(owned: Owned, first: int, forge: Forge) -> None:
    """Change entries from `first` on and make every later digest, column and the head fit."""
    entries = owned.rows("SELECT number, canonical FROM history_events ORDER BY number")
    leaves = [leaf(raw) for _, raw in entries[: first - 1]]
    changes: list[tuple[str, tuple[Any, ...]]] = []
    update = "UPDATE history_events SET canonical = ?, previous = ?, digest = ?, actor = ? WHERE number = ?"
    for number, raw in entries[first - 1 :]:
        entry = json.loads(raw)
        entry["previous"] = leaves[-1].hex() if leaves else "0" * 64
        forge(entry, root(leaves).hex(), leaves[0].hex() if leaves else "")
        forged = json.dumps(entry, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()
        leaves.append(leaf(forged))
        changes.append((update, (forged, entry["previous"], leaves[-1].hex(), entry["actor"], number)))
    # each digest has to be free before another entry takes it
    free = "UPDATE history_events SET digest = CAST(number AS TEXT), previous = CAST(-number AS TEXT)"
    free += f" WHERE number >= {first}"
    owned.execute(free, *changes)
    set_head(owned)


def rewrite_with_checkpoints_from(
    owned: Owned, first: int, forge: Forge, remake: Callable[[dict[str, Any]], None] = lambda _row: None
) -> None:
    """Rewrite as above, and make each kept checkpoint fit as far as that takes no key.

    `remake` does what the forger can about a signature that does not fit any more.
    """
    rewritten: dict[int, tuple[str, dict[str, Any]]] = {}

    def forge_all(entry: dict[str, Any], root: str, origin: str) -> None:
        forge(entry, root, origin)
        for table in CHECKPOINTS:
            for row in entry["rows"].get(table, ()):
                row |= {"origin": origin, "digest": root, "head": entry["previous"]}
                if row["signature"] is not None:
                    remake(row)
                rewritten[entry["number"]] = table, row

    rewrite_from(owned, first, forge_all)
    names = ("origin", "digest", "head", "public_key", "signature")
    columns = ", ".join(f"{name} = ?" for name in names)
    for number, (table, row) in rewritten.items():
        change = f"UPDATE {table} SET {columns} WHERE event_number = ?"  # noqa: S608
        owned.execute((change, (*(row[name] for name in names), number)))
