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


def inclusion_path(leaves: list[bytes], index: int) -> list[bytes]:
    """Return the hashes that lead from leaf `index` (from 0) to the root (RFC 9162, section 2.1.3.1).

    `leaves` are leaf hashes.
    """
    if len(leaves) == 1:
        return []
    split = _split(len(leaves))
    left, right = leaves[:split], leaves[split:]
    if index < split:
        return [*inclusion_path(left, index), _root_of(right)]
    return [*inclusion_path(right, index - split), _root_of(left)]


def consistency_path(leaves: list[bytes], first: int) -> list[bytes]:
    """Return the hashes that prove the first `first` leaves to begin the tree (RFC 9162, section 2.1.4.1).

    `leaves` are leaf hashes, and 0 < first ≤ their number.
    """
    return _subproof(leaves, first, whole=True)


def root_of(leaves: list[bytes]) -> bytes:
    """Return the root over leaf hashes."""
    return _root_of(leaves) if leaves else hashlib.sha256(b"").digest()


def _subproof(leaves: list[bytes], first: int, *, whole: bool) -> list[bytes]:
    if first == len(leaves):
        return [] if whole else [_root_of(leaves)]
    split = _split(len(leaves))
    left, right = leaves[:split], leaves[split:]
    if first <= split:
        return [*_subproof(left, first, whole=whole), _root_of(right)]
    return [*_subproof(right, first - split, whole=False), _root_of(left)]


def _root_of(leaves: list[bytes]) -> bytes:
    # level by level: pairs from the left, and whatever is left over moves up as it is
    level = leaves
    while len(level) > 1:
        pairs = [node_hash(level[place], level[place + 1]) for place in range(0, len(level) - 1, 2)]
        level = pairs if len(level) % 2 == 0 else [*pairs, level[-1]]
    return level[0]


def _split(leaves: int) -> int:
    """The largest power of two below the number of leaves."""
    return 1 << ((leaves - 1).bit_length() - 1)


def _roots(right_edge: bytes) -> list[bytes]:
    return [right_edge[start : start + HASH_BYTES] for start in range(0, len(right_edge), HASH_BYTES)]
