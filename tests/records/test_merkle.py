"""Proofs are accepted by the procedures of RFC 9162, written here as the standard words them."""

from __future__ import annotations

import hashlib

import pytest

from service.records import merkle
from service.verification.tree import Tree, leaf_hash

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


PUBLISHED = {
    "": "6e340b9cffb37a989ca544e6bb780a2c78901d3fb33738768511a30617afa01d",
    "00": "fac54203e7cc696cf0dfcb42c92a1d9dbaf70ad9e621f4bd8d98662f00e3c125",
    "10": "aeb6bcfe274b70a14fb067a5e5578264db0fa9b51af5e0ba159158f329e06e77",
    "2021": "d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
    "3031": "4e3bbb1f7b478dcfe71fb631631519a3bca12c9aefca1612bfce4c13a86264d4",
    "40414243": "76e67dadbcdf1e10e1b74ddc608abd2f98dfb16fbce75277b5232a127f2087ef",
    "5051525354555657": "ddb89be403809e325750d3d263cd78929c2942b7942a34b77e122c9594a74c8c",
    "606162636465666768696a6b6c6d6e6f": "5dc9da79a70659a9ad559cb701ded9a2ab9d823aad2f4960cfe370eff4604328",
}
"""Leaf, in hex → root of the tree that ends with it: the vectors with which the reference implementation of
Certificate Transparency (RFC 6962, whose tree RFC 9162 keeps) tries its own; from memory.
"""


def test_the_writers_and_the_verifiers_trees_have_the_published_roots() -> None:
    leaves, tree = [], Tree()
    for leaf, root in PUBLISHED.items():
        leaves.append(merkle.leaf_hash(bytes.fromhex(leaf)))
        tree.add(leaf_hash(bytes.fromhex(leaf)))
        assert merkle.root_of(leaves).hex() == tree.root.hex() == root


def test_a_tree_without_leaves_has_the_digest_of_nothing_for_its_root() -> None:
    """RFC 9162, section 2.1.1."""
    nothing = hashlib.sha256(b"").digest()
    assert merkle.root_of([]) == merkle.root(b"") == Tree().root == nothing
    assert Tree().edge == b""


def test_the_root_grown_leaf_by_leaf_is_the_root_of_all_leaves() -> None:
    edge = b""
    for size, leaf in enumerate(LEAVES):
        assert merkle.root(edge) == merkle.root_of(LEAVES[:size])
        edge = merkle.with_leaf(edge, size, leaf)
