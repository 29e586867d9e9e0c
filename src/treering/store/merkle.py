"""The Merkle tree over entries: roots, inclusion proofs, consistency proofs (RFC 9162, section 2.1).

Pure functions over hashes. A tree of `size` leaves is described by one function ``node(level, index)`` that
gives the root of the full subtree over leaves ``index * 2**level`` to ``(index + 1) * 2**level - 1``; where
these hashes come from (a list, a database) is the caller's affair. Verification needs no tree at all.

References
----------
Laurie B, Messeri E, Stradling R. Certificate Transparency Version 2.0. RFC 9162 (2021), sections 2.1.1
(hash), 2.1.3 (inclusion) and 2.1.4 (consistency).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from hashlib import sha256

Node = Callable[[int, int], bytes]
"""Level and index of a full subtree to its root hash."""

EMPTY_ROOT = sha256(b"").digest()


def leaf_hash(data: bytes) -> bytes:
    """Return the hash of one leaf: SHA-256 of 0x00 and the data (RFC 9162, 2.1.1).

    Parameters
    ----------
    data : bytes
        Canonical bytes of an entry.

    Returns
    -------
    bytes
        32 bytes.
    """
    return sha256(b"\x00" + data).digest()


def node_hash(left: bytes, right: bytes) -> bytes:
    """Return the hash of an inner node: SHA-256 of 0x01, left and right (RFC 9162, 2.1.1).

    Parameters
    ----------
    left, right : bytes
        Hashes of the two children.

    Returns
    -------
    bytes
        32 bytes.
    """
    return sha256(b"\x01" + left + right).digest()


class Frontier:
    """The full subtrees that a tree of a given size falls into, largest first; all that growing needs.

    Parameters
    ----------
    size : int
        Leaves so far.
    peaks : sequence of bytes
        Roots of the full subtrees, one for each 1 bit of `size`, largest first.
    """

    __slots__ = ("peaks", "size")

    def __init__(self, size: int = 0, peaks: Iterable[bytes] = ()) -> None:
        self.size = size
        self.peaks = list(peaks)

    def copy(self) -> Frontier:
        """Return an independent copy.

        Returns
        -------
        Frontier
            The same size and peaks.
        """
        return Frontier(self.size, self.peaks)

    def add(self, leaf: bytes) -> list[tuple[int, int, bytes]]:
        """Add one leaf.

        Parameters
        ----------
        leaf : bytes
            Leaf hash.

        Returns
        -------
        list of (level, index, hash)
            The inner nodes that became full, level 1 upwards.
        """
        full: list[tuple[int, int, bytes]] = []
        position, level, carried = self.size, 0, leaf
        while position & 1:
            carried = sha256(b"\x01" + self.peaks.pop() + carried).digest()
            position >>= 1
            level += 1
            full.append((level, position, carried))
        self.peaks.append(carried)
        self.size += 1
        return full

    def root(self) -> bytes:
        """Return the root of the tree.

        Returns
        -------
        bytes
            The Merkle tree hash of all leaves added (RFC 9162, 2.1.1).
        """
        if not self.peaks:
            return EMPTY_ROOT
        carried = self.peaks[-1]
        for peak in reversed(self.peaks[:-1]):
            carried = node_hash(peak, carried)
        return carried


def frontier(size: int, node: Node) -> Frontier:
    """Read the frontier of a tree.

    Parameters
    ----------
    size : int
        Leaves of the tree.
    node : callable
        Full subtrees of the tree.

    Returns
    -------
    Frontier
        Ready to grow.
    """
    peaks, start = [], 0
    for level in range(size.bit_length() - 1, -1, -1):
        if size >> level & 1:
            peaks.append(node(level, start >> level))
            start += 1 << level
    return Frontier(size, peaks)


def nodes_of(leaves: Sequence[bytes]) -> Node:
    """Return the node function of a list of leaf hashes.

    Parameters
    ----------
    leaves : sequence of bytes
        All leaf hashes, in order.

    Returns
    -------
    callable
        Level and index to hash, computed by the definition.
    """

    def node(level: int, index: int) -> bytes:
        if level == 0:
            return leaves[index]
        return node_hash(node(level - 1, 2 * index), node(level - 1, 2 * index + 1))

    return node


def root(size: int, node: Node) -> bytes:
    """Return the root of the first `size` leaves.

    Parameters
    ----------
    size : int
        Number of leaves.
    node : callable
        Full subtrees of a tree at least that large.

    Returns
    -------
    bytes
        Merkle tree hash (RFC 9162, 2.1.1).
    """
    return frontier(size, node).root()


def inclusion_proof(index: int, size: int, node: Node) -> list[bytes]:
    """Return the proof that leaf `index` is in the tree of the first `size` leaves.

    Parameters
    ----------
    index : int
        Leaf, from 0.
    size : int
        Number of leaves.
    node : callable
        Full subtrees of a tree at least that large.

    Returns
    -------
    list of bytes
        PATH(index, D_size) of RFC 9162, 2.1.3.1, from the leaf's sibling upwards.

    Raises
    ------
    ValueError
        When the leaf is not in the tree.
    """
    if not 0 <= index < size:
        raise ValueError(f"leaf {index} is not in a tree of {size}")
    proof: list[bytes] = []
    start, stop = 0, size
    while stop - start > 1:
        middle = start + _split(stop - start)
        if index < middle:
            proof.append(_subtree(middle, stop, node))
            stop = middle
        else:
            proof.append(_subtree(start, middle, node))
            start = middle
    return proof[::-1]


def consistency_proof(first: int, second: int, node: Node) -> list[bytes]:
    """Return the proof that the tree of `second` leaves extends the tree of `first`.

    Parameters
    ----------
    first, second : int
        Sizes, 1 <= first <= second.
    node : callable
        Full subtrees of a tree of at least `second` leaves.

    Returns
    -------
    list of bytes
        PROOF(first, D_second) of RFC 9162, 2.1.4.1; empty when both are equal.

    Raises
    ------
    ValueError
        When the sizes are not in order.
    """
    if not 1 <= first <= second:
        raise ValueError(f"no consistency proof from {first} to {second} leaves")
    proof: list[bytes] = []
    start, stop, whole = 0, second, True
    while first != stop:
        middle = start + _split(stop - start)
        if first <= middle:
            proof.append(_subtree(middle, stop, node))
            stop = middle
        else:
            proof.append(_subtree(start, middle, node))
            start, whole = middle, False
    if not whole:
        proof.append(_subtree(start, stop, node))
    return proof[::-1]


def verify_inclusion(leaf: bytes, index: int, size: int, proof: Sequence[bytes], expected: bytes) -> bool:
    """Tell whether a proof shows that a leaf is in the tree with a known root.

    Parameters
    ----------
    leaf : bytes
        Leaf hash.
    index, size : int
        Place of the leaf and size of the tree.
    proof : sequence of bytes
        As :func:`inclusion_proof` returns it.
    expected : bytes
        Root of the tree, from a source that is trusted.

    Returns
    -------
    bool
        The algorithm of RFC 9162, 2.1.3.2.
    """
    if not 0 <= index < size:
        return False
    position, last, carried = index, size - 1, leaf
    for step in proof:
        if last == 0:
            return False
        if position & 1 or position == last:
            carried = node_hash(step, carried)
            while not position & 1 and position:
                position, last = position >> 1, last >> 1
        else:
            carried = node_hash(carried, step)
        position, last = position >> 1, last >> 1
    return last == 0 and carried == expected


def verify_consistency(
    first: int, second: int, first_root: bytes, second_root: bytes, proof: Sequence[bytes]
) -> bool:
    """Tell whether a proof shows that one tree extends another.

    Parameters
    ----------
    first, second : int
        Sizes of the two trees.
    first_root, second_root : bytes
        Their roots, each from a source that is trusted.
    proof : sequence of bytes
        As :func:`consistency_proof` returns it.

    Returns
    -------
    bool
        The algorithm of RFC 9162, 2.1.4.2; equal sizes need equal roots and an empty proof.
    """
    if not 1 <= first <= second:
        return False
    if first == second:
        return not proof and first_root == second_root
    steps = list(proof) if first & (first - 1) else [first_root, *proof]
    if not steps:
        return False
    position, last = first - 1, second - 1
    while position & 1:
        position, last = position >> 1, last >> 1
    old = new = steps[0]
    for step in steps[1:]:
        if last == 0:
            return False
        if position & 1 or position == last:
            old, new = node_hash(step, old), node_hash(step, new)
            while not position & 1 and position:
                position, last = position >> 1, last >> 1
        else:
            new = node_hash(new, step)
        position, last = position >> 1, last >> 1
    return last == 0 and old == first_root and new == second_root


def _split(count: int) -> int:
    """Return the largest power of two smaller than `count` (count >= 2)."""
    return 1 << (count - 1).bit_length() - 1


def _subtree(start: int, stop: int, node: Node) -> bytes:
    """Return the tree hash of leaves start to stop - 1; start is a multiple of their largest full subtree."""
    count = stop - start
    level = count.bit_length() - 1
    if count == 1 << level:
        return node(level, start >> level)
    middle = start + (1 << level)
    return node_hash(node(level, start >> level), _subtree(middle, stop, node))
