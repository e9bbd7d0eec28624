"""The Merkle tree of RFC 9162, section 2.1, grown one leaf at a time at its right edge.

The right edge of a tree of n leaves are the roots of its perfect subtrees, largest first: one for each bit
that is set in n. From it alone come the root and the next edge, so that no earlier leaf is read again.
"""

from __future__ import annotations

import hashlib

HASH_BYTES = 32


def leaf_hash(leaf: bytes) -> bytes:
    """Return the hash of a leaf: SHA-256(0x00 ‖ leaf)."""
    return hashlib.sha256(b"\x00" + leaf).digest()


def node_hash(left: bytes, right: bytes) -> bytes:
    """Return the hash of an inner node: SHA-256(0x01 ‖ left ‖ right)."""
    return hashlib.sha256(b"\x01" + left + right).digest()


def with_leaf(right_edge: bytes, size: int, leaf: bytes) -> bytes:
    """Return the right edge after the leaf hash `leaf` is added to a tree of `size` leaves."""
    roots = _roots(right_edge)
    node = leaf
    # as in a carry of binary addition: each subtree of the present size is completed by its neighbour
    while size & 1:
        node = node_hash(roots.pop(), node)
        size >>= 1
    return b"".join([*roots, node])


def root(right_edge: bytes) -> bytes:
    """Return the root of the tree; of no leaves the SHA-256 of nothing, as the standard says."""
    roots = _roots(right_edge)
    if not roots:
        return hashlib.sha256(b"").digest()
    node = roots.pop()
    while roots:
        node = node_hash(roots.pop(), node)
    return node


def _roots(right_edge: bytes) -> list[bytes]:
    return [right_edge[start : start + HASH_BYTES] for start in range(0, len(right_edge), HASH_BYTES)]
