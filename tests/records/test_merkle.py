"""Proofs are accepted by the procedures of RFC 9162, written here as the standard words them."""

from __future__ import annotations

import hashlib

import pytest

from service.records import merkle

LEAVES = [merkle.leaf_hash(bytes([number])) for number in range(70)]


def node(left: bytes, right: bytes) -> bytes:
    return hashlib.sha256(b"\x01" + left + right).digest()


def inclusion_holds(leaf: bytes, index: int, size: int, path: list[bytes], root: bytes) -> bool:
    """RFC 9162, section 2.1.3.2, step by step."""
    if index >= size:
        return False
    fn, sn, r = index, size - 1, leaf
    for p in path:
        if sn == 0:
            return False
        if fn & 1 or fn == sn:
            r = node(p, r)
            while not fn & 1 and fn != 0:
                fn, sn = fn >> 1, sn >> 1
        else:
            r = node(r, p)
        fn, sn = fn >> 1, sn >> 1
    return sn == 0 and r == root


def consistency_holds(first: int, second: int, old: bytes, new: bytes, path: list[bytes]) -> bool:
    """RFC 9162, section 2.1.4.2, step by step; equal sizes need no path."""
    if first == second:
        return path == [] and old == new
    if not path and first & (first - 1):
        return False
    proof = [old, *path] if first & (first - 1) == 0 else list(path)
    fn, sn = first - 1, second - 1
    while fn & 1:
        fn, sn = fn >> 1, sn >> 1
    fr = sr = proof[0]
    for c in proof[1:]:
        if sn == 0:
            return False
        if fn & 1 or fn == sn:
            fr, sr = node(c, fr), node(c, sr)
            while not fn & 1 and fn != 0:
                fn, sn = fn >> 1, sn >> 1
        else:
            sr = node(sr, c)
        fn, sn = fn >> 1, sn >> 1
    return sn == 0 and fr == old and sr == new


@pytest.mark.parametrize("size", range(1, 36))
def test_every_leaf_is_proven_to_be_in_every_tree(size: int) -> None:
    leaves = LEAVES[:size]
    root = merkle.root_of(leaves)
    for index in range(size):
        path = merkle.inclusion_path(leaves, index)
        assert inclusion_holds(leaves[index], index, size, path, root)
        assert not inclusion_holds(leaves[index], (index + 1) % size, size, path, root) or size == 1
        assert not inclusion_holds(LEAVES[-1], index, size, path, root)


@pytest.mark.parametrize("second", range(1, 36))
def test_every_tree_is_proven_to_begin_every_later_one(second: int) -> None:
    root = merkle.root_of(LEAVES[:second])
    for first in range(1, second + 1):
        old = merkle.root_of(LEAVES[:first])
        path = merkle.consistency_path(LEAVES[:second], first)
        assert consistency_holds(first, second, old, root, path)
        assert not consistency_holds(first, second, merkle.root_of(LEAVES[1 : first + 1]), root, path)


def test_the_root_grown_leaf_by_leaf_is_the_root_of_all_leaves() -> None:
    edge = b""
    for size, leaf in enumerate(LEAVES):
        assert merkle.root(edge) == merkle.root_of(LEAVES[:size])
        edge = merkle.with_leaf(edge, size, leaf)
