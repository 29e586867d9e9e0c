"""Checks 6 and 10 in one pass over the canonical bytes: the Merkle tree grows as it did when they came."""

from __future__ import annotations

from collections.abc import Sequence
from hashlib import sha256

from treering.store.canonical import parse
from treering.store.chain import ChainRow
from treering.store.checkpoint import Checkpoint
from treering.store.checks import RESTORE, Findings
from treering.store.merkle import Frontier
from treering.store.plan import KEPT_LEVEL

_VERSION = b'"kind":"version","known_at":"'
_BLOCK = 1 << KEPT_LEVEL


class TreePass:
    """Lets the tree grow entry by entry and holds versions, kept nodes and checkpoints against it.

    Parameters
    ----------
    findings : Findings
        Where faults are noted.
    nodes : dict of (level, position) to bytes
        Inner nodes as the store keeps them; those met are taken out.
    checkpoints : sequence of Checkpoint, optional
        Heads of the past.
    """

    def __init__(
        self,
        findings: Findings,
        nodes: dict[tuple[int, int], bytes],
        checkpoints: Sequence[Checkpoint] = (),
    ) -> None:
        self.versions: list[tuple[int, int]] = []
        self._findings = findings
        self._nodes = nodes
        self._kept = len(nodes)
        self._frontier = Frontier()
        self._waiting = sorted(checkpoints, key=lambda checkpoint: checkpoint.size, reverse=True)
        self._met = (0, len(self._waiting))  # size of the last checkpoint that agreed; how many there are
        for check in (6, 10):
            findings.seen[check] = ""

    def grow(self, page: Sequence[ChainRow]) -> None:
        """Let the tree grow over one page.

        Parameters
        ----------
        page : sequence of (seq, canonical bytes, hash)
            The entries that follow.
        """
        datas = [
            data if isinstance(data, bytes) else str(data).encode("utf-8", "replace") for _, data, _ in page
        ]
        leaves = [sha256(b"\x00" + data).digest() for data in datas]
        begin, done = self._frontier.size, 0
        # Between versions and checkpoints nothing asks for the root, so that whole blocks can be added.
        stops = {place for place, data in enumerate(datas) if _VERSION in data}
        stops |= {max(point.size - begin, 0) for point in self._waiting if point.size < begin + len(page)}
        for stop in sorted(stops):
            self._extend(leaves[done:stop])
            done = stop
            if self._waiting and self._waiting[-1].size <= self._frontier.size:
                self._meet()
            if _VERSION in datas[stop]:
                self._version(page[stop][0], datas[stop])
        self._extend(leaves[done:])

    def _extend(self, leaves: Sequence[bytes]) -> None:
        """Add leaves, a full block at a time where one begins here."""
        tree, place = self._frontier, 0
        while place < len(leaves):
            if tree.size % _BLOCK == 0 and len(leaves) - place >= _BLOCK:
                self._compare(_add_block(tree, leaves[place : place + _BLOCK]))
                place += _BLOCK
            else:
                self._compare(tree.add(leaves[place]))
                place += 1

    def _compare(self, full: Sequence[tuple[int, int, bytes]]) -> None:
        """Hold the nodes that became full against those kept."""
        for level, position, made in full:
            if level >= KEPT_LEVEL and self._nodes.pop((level, position), None) != made:
                self._findings.add(
                    6,
                    f"node {position} of level {level} is missing or is not the hash of its entries.",
                    seq=((position + 1) << level) - 1,
                    expected=made.hex(),
                    step=RESTORE,
                )

    def _version(self, seq: int, canonical: bytes) -> None:
        """Hold a version against the tree before it."""
        try:
            value = parse(canonical)
            body = value["body"]
            if value["kind"] != "version":
                return  # the words stand inside another entry's body
            number, size, root = int(body["version"]), body["entries"], body["root"]
        except (ValueError, KeyError, TypeError, RecursionError):
            return self._findings.add(6, "it is a version that cannot be read.", seq=seq)
        last = self.versions[-1][1] if self.versions else 0
        if number != last + 1:
            self._findings.add(
                6, "versions are not in order.", seq=seq, version=number, found=number, expected=last + 1
            )
        made = self._frontier.root().hex()
        if (size, root) != (self._frontier.size, made):
            self._findings.add(
                6,
                "the version does not state the head of the tree over the entries before it.",
                seq=seq,
                version=number,
                found=f"{size} {root}",
                expected=f"{self._frontier.size} {made}",
            )
        self.versions.append((seq, number))

    def _meet(self) -> None:
        """Hold the checkpoints of the present size against the tree."""
        root = self._frontier.root().hex()
        while self._waiting and self._waiting[-1].size <= self._frontier.size:
            point = self._waiting.pop()
            if point.root == root:
                self._met = (point.size, self._met[1])
                continue
            since = self._met[0]
            self._findings.add(
                10,
                f"The head of {point.size} entries ({point.source}) is not in this store: something among "
                f"entries {since} to {point.size - 1} was rewritten, put in or taken out.",
                found=f"{point.size} {root}",
                expected=f"{point.size} {point.root}",
                step="Compare these entries with a copy from before; a checkpoint cannot be made to fit.",
            )

    def finish(self) -> None:
        """Say what was left over when the last entry was read."""
        total = self._frontier.size
        if self._waiting and self._waiting[-1].size <= total:
            self._meet()
        for point in reversed(self._waiting):
            self._findings.add(
                10,
                f"Its tail was cut: it holds fewer entries than the head of {point.size} ({point.source}).",
                found=f"{total} entries",
                expected=f"at least {point.size}",
                step=f"Take entries {total} to {point.size - 1} from a copy made after that head.",
            )
        for level, position in sorted(self._nodes):
            self._findings.add(
                6, f"node {position} of level {level} belongs to no entries of this store.", step=RESTORE
            )
        self._findings.seen[6] = f"{len(self.versions)} versions, {self._kept} kept nodes"
        count = self._met[1]
        self._findings.seen[10] = f"{count} checkpoints" if count else "not checked: none was given"


def _add_block(tree: Frontier, leaves: Sequence[bytes]) -> list[tuple[int, int, bytes]]:
    """Add a full block of leaves to a tree made of full blocks; return the nodes that became full."""
    hashes = list(leaves)
    while len(hashes) > 1:
        pairs = zip(hashes[::2], hashes[1::2], strict=True)
        hashes = [sha256(b"\x01" + left + right).digest() for left, right in pairs]
    position, level, carried = tree.size >> KEPT_LEVEL, KEPT_LEVEL, hashes[0]
    full = [(level, position, carried)]
    while position & 1:
        carried = sha256(b"\x01" + tree.peaks.pop() + carried).digest()
        position, level = position >> 1, level + 1
        full.append((level, position, carried))
    tree.peaks.append(carried)
    tree.size += len(leaves)
    return full
