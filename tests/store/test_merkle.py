"""The Merkle tree against its definition in RFC 9162 (Laurie, Messeri, Stradling 2021), section 2.1.

Independent of the code under test: `mth`, `path` and `proof` are the recursive definitions of sections
2.1.1, 2.1.3.1 and 2.1.4.1 written down as they stand there. The eight leaves and the root below are the test
inputs of the Certificate Transparency code base, from memory.
"""

from __future__ import annotations

from hashlib import sha256

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.store import merkle

CT_LEAVES = [
    bytes.fromhex(text)
    for text in (
        "",
        "00",
        "10",
        "2021",
        "3031",
        "40414243",
        "5051525354555657",
        "606162636465666768696a6b6c6d6e6f",
    )
]
CT_ROOT = "5dc9da79a70659a9ad559cb701ded9a2ab9d823aad2f4960cfe370eff4604328"


def mth(data):
    if not data:
        return sha256(b"").digest()
    if len(data) == 1:
        return sha256(b"\x00" + data[0]).digest()
    k = largest_power_below(len(data))
    return sha256(b"\x01" + mth(data[:k]) + mth(data[k:])).digest()


def path(m, data):
    if len(data) == 1:
        return []
    k = largest_power_below(len(data))
    if m < k:
        return [*path(m, data[:k]), mth(data[k:])]
    return [*path(m - k, data[k:]), mth(data[:k])]


def subproof(m, data, whole):
    if m == len(data):
        return [] if whole else [mth(data)]
    k = largest_power_below(len(data))
    if m <= k:
        return [*subproof(m, data[:k], whole), mth(data[k:])]
    return [*subproof(m - k, data[k:], False), mth(data[:k])]


def largest_power_below(count):
    power = 1
    while power * 2 < count:
        power *= 2
    return power


def tree(count):
    data = [b"entry %d" % number for number in range(count)]
    return data, merkle.nodes_of([merkle.leaf_hash(item) for item in data])


def test_root_of_the_certificate_transparency_leaves():
    leaves = [merkle.leaf_hash(leaf) for leaf in CT_LEAVES]
    assert merkle.root(8, merkle.nodes_of(leaves)).hex() == CT_ROOT
    assert mth(CT_LEAVES).hex() == CT_ROOT


def test_root_of_nothing_is_the_hash_of_nothing():
    assert merkle.root(0, merkle.nodes_of([])) == sha256(b"").digest()
    assert merkle.Frontier().root() == merkle.EMPTY_ROOT


@pytest.mark.parametrize("size", range(1, 34))
def test_every_proof_of_small_trees_is_the_one_of_the_definition(size):
    data, node = tree(size)
    root = mth(data)
    assert merkle.root(size, node) == root
    for index in range(size):
        steps = merkle.inclusion_proof(index, size, node)
        assert steps == path(index, data)
        assert merkle.verify_inclusion(merkle.leaf_hash(data[index]), index, size, steps, root)
    for first in range(1, size + 1):
        steps = merkle.consistency_proof(first, size, node)
        assert steps == subproof(first, data, True)
        assert merkle.verify_consistency(first, size, mth(data[:first]), root, steps)


@given(st.integers(0, 700))
def test_growing_leaf_by_leaf_gives_the_root_of_the_definition(size):
    data, _ = tree(size)
    growing = merkle.Frontier()
    full = {}
    for item in data:
        full |= {(level, index): value for level, index, value in growing.add(merkle.leaf_hash(item))}
    assert growing.root() == mth(data)
    assert all(
        value == mth(data[index << level : (index + 1) << level]) for (level, index), value in full.items()
    )


@given(st.integers(0, 300), st.integers(0, 40))
def test_frontier_read_from_a_tree_goes_on_growing(size, more):
    data, node = tree(size + more)
    grown = merkle.frontier(size, node)
    for item in data[size:]:
        grown.add(merkle.leaf_hash(item))
    assert grown.root() == mth(data)


@given(st.data())
def test_altered_inclusion_proofs_fail(draw):
    size = draw.draw(st.integers(2, 80))
    index = draw.draw(st.integers(0, size - 1))
    data, node = tree(size)
    steps, root = merkle.inclusion_proof(index, size, node), mth(data)
    leaf = merkle.leaf_hash(data[index])
    place = draw.draw(st.integers(0, len(steps) - 1))
    altered = [*steps[:place], sha256(steps[place]).digest(), *steps[place + 1 :]]
    other = draw.draw(st.integers(0, size - 1).filter(lambda number: number != index))
    assert not merkle.verify_inclusion(leaf, index, size, altered, root)
    assert not merkle.verify_inclusion(leaf, index, size, steps[:-1], root)
    assert not merkle.verify_inclusion(leaf, index, size, [*steps, root], root)
    assert not merkle.verify_inclusion(leaf, other, size, steps, root)
    assert not merkle.verify_inclusion(merkle.leaf_hash(data[other]), index, size, steps, root)
    assert not merkle.verify_inclusion(leaf, size, size, steps, root)


@given(st.data())
def test_altered_consistency_proofs_fail(draw):
    second = draw.draw(st.integers(2, 80))
    first = draw.draw(st.integers(1, second - 1))
    data, node = tree(second)
    steps = merkle.consistency_proof(first, second, node)
    old, new = mth(data[:first]), mth(data)
    place = draw.draw(st.integers(0, len(steps) - 1))
    altered = [*steps[:place], sha256(steps[place]).digest(), *steps[place + 1 :]]
    rewritten = mth([b"other", *data[1:first]])
    assert not merkle.verify_consistency(first, second, old, new, altered)
    assert not merkle.verify_consistency(first, second, old, new, steps[:-1])
    assert not merkle.verify_consistency(first, second, rewritten, new, steps)
    assert not merkle.verify_consistency(first, second, old, mth(data[:-1]), steps)
    assert not merkle.verify_consistency(first, second, old, new, [])


def test_same_size_is_consistent_only_with_the_same_root():
    assert merkle.verify_consistency(3, 3, b"a", b"a", [])
    assert not merkle.verify_consistency(3, 3, b"a", b"b", [])
    assert not merkle.verify_consistency(3, 3, b"a", b"a", [b"a"])
    assert not merkle.verify_consistency(4, 3, b"a", b"a", [])
    assert not merkle.verify_consistency(0, 3, b"a", b"a", [])


def test_proofs_for_what_is_not_there_are_refused():
    _, node = tree(3)
    with pytest.raises(ValueError, match="leaf 3 is not in a tree of 3"):
        merkle.inclusion_proof(3, 3, node)
    with pytest.raises(ValueError, match="from 0 to 3"):
        merkle.consistency_proof(0, 3, node)
