"""The tree that the audit grows block by block is the one RFC 9162 defines."""

from __future__ import annotations

from functools import cache
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.store import merkle
from treering.store.audit_tree import TreePass
from treering.store.checkpoint import Checkpoint
from treering.store.checks import Findings
from treering.store.plan import KEPT_LEVEL

SIZE = 1200
ROWS = [(seq, b"entry %d" % seq, b"") for seq in range(SIZE)]


@cache
def node(level: int, index: int) -> bytes:
    """A full subtree by its definition (RFC 9162, 2.1.1)."""
    if level == 0:
        return merkle.leaf_hash(ROWS[index][1])
    return merkle.node_hash(node(level - 1, 2 * index), node(level - 1, 2 * index + 1))


@cache
def root(size: int) -> str:
    return merkle.root(size, node).hex()


def kept(size: int) -> dict[tuple[int, int], bytes]:
    """The kept nodes of a tree, each by its definition."""
    levels = range(KEPT_LEVEL, size.bit_length())
    return {(level, place): node(level, place) for level in levels for place in range(size >> level)}


def grown(size: int, cuts: list[int], points: list[Checkpoint]) -> dict[int, tuple[str, ...]]:
    findings = Findings()
    tree = TreePass(findings, kept(size), points)
    edges = sorted({0, size, *(cut for cut in cuts if cut < size)})
    for first, last in pairwise(edges):
        tree.grow(ROWS[first:last])
    tree.finish()
    return {check.number: check.faults for check in findings.checks() if not check.holds}


@given(
    size=st.integers(1, SIZE),
    cuts=st.lists(st.integers(1, SIZE), max_size=4),
    sizes=st.lists(st.integers(0, SIZE), max_size=4),
)
def test_roots_and_nodes_are_those_of_the_definition(size, cuts, sizes):
    points = [Checkpoint(min(point, size), root(min(point, size))) for point in sizes]
    assert grown(size, cuts, points) == {}


@given(size=st.integers(1, SIZE), cuts=st.lists(st.integers(1, SIZE), max_size=4), data=st.data())
def test_a_false_checkpoint_is_found_wherever_it_lies(size, cuts, data):
    place = data.draw(st.integers(0, size))
    points = [Checkpoint(place, "00" * 32), Checkpoint(size, root(size))]
    assert list(grown(size, cuts, points)) == [10]


@pytest.mark.parametrize("size", [256, 512, 1024, 1100])
def test_a_false_kept_node_is_found(size):
    for place in kept(size):
        findings = Findings()
        tree = TreePass(findings, kept(size) | {place: b"false"})
        tree.grow(ROWS[:size])
        tree.finish()
        (check,) = (check for check in findings.checks() if not check.holds)
        assert check.number == 6
        assert f"node {place[1]} of level {place[0]}" in check.faults[0]
