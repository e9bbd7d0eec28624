"""Hashes of RFC 9162, section 2.1.1, and the root of a tree that is fed leaf by leaf."""

from __future__ import annotations

import hashlib


def leaf_hash(leaf: bytes) -> bytes:
    """SHA-256 over a zero byte and the leaf."""
    return hashlib.sha256(b"\0" + leaf).digest()


class Tree:
    """Perfect subtrees with their heights, joined as they become equal."""

    def __init__(self) -> None:
        self._subtrees: list[tuple[int, bytes]] = []

    def add(self, leaf: bytes) -> None:
        """Add the hash of the next leaf."""
        self._subtrees.append((0, leaf))
        while len(self._subtrees) > 1 and self._subtrees[-1][0] == self._subtrees[-2][0]:
            (_, right), (height, left) = self._subtrees.pop(), self._subtrees.pop()
            self._subtrees.append((height + 1, _node_hash(left, right)))

    @property
    def edge(self) -> bytes:
        """The roots of the subtrees, largest first, one after another."""
        return b"".join(root for _, root in self._subtrees)

    @property
    def root(self) -> bytes:
        """The root of the whole tree."""
        if not self._subtrees:
            return hashlib.sha256().digest()
        *rest, (_, node) = self._subtrees
        for _, left in reversed(rest):
            node = _node_hash(left, node)
        return node


def _node_hash(left: bytes, right: bytes) -> bytes:
    return hashlib.sha256(b"\1" + left + right).digest()
