"""Checks 2, 3, 4, 6, 10 and the clock in one pass over the ledger; memory does not grow with it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from hashlib import sha256

from sqlalchemy import Engine

from treering.errors import LedgerError
from treering.store.canonical import parse
from treering.store.chain import ChainRow, check_links, stated_previous, stated_seq
from treering.store.checkpoint import Checkpoint
from treering.store.checks import RESTORE, Findings
from treering.store.connection import reading
from treering.store.entries import ROW_FIELDS, LedgerRow
from treering.store.merkle import Frontier
from treering.store.plan import KEPT_LEVEL
from treering.store.reader import fetch

PAGE = 5000
_LOWEST = -(2**63)
_COLUMNS = ", ".join(f'"{name}"' for name in ROW_FIELDS)
_PAGE_QUERY = f"SELECT {_COLUMNS} FROM entry WHERE seq >= ? AND seq < ? ORDER BY seq LIMIT {PAGE}"
_VERSION = b'"kind":"version","known_at":"'


def chain_of(page: Sequence[LedgerRow]) -> list[ChainRow]:
    """Return what the chain rules need of the rows of a page.

    Parameters
    ----------
    page : sequence of LedgerRow
        Rows of the ledger.

    Returns
    -------
    list of (seq, canonical bytes, hash)
        In the same order.
    """
    return [(row[0], row[10], row[9]) for row in page]


def pages(engine: Engine, limit: int) -> Iterator[list[LedgerRow]]:
    """Yield the ledger a page at a time, whatever numbers its entries bear.

    Parameters
    ----------
    engine : Engine
        Of the store.
    limit : int
        Entries with a smaller number count; later ones came while the audit ran.

    Yields
    ------
    list of LedgerRow
        In order. Pages follow the entries, not their numbers: one entry numbered a billion must not make
        the audit walk through a billion places.
    """
    first = _LOWEST
    while True:
        with reading(engine) as connection:
            page = fetch(connection, _PAGE_QUERY, first, limit)
        if not page:
            return
        yield page
        first = page[-1][0] + 1


class ChainPass:
    """Walks over the ledger once and follows numbers, hashes, links and the growing tree.

    Parameters
    ----------
    findings : Findings
        Where faults are noted.
    nodes : dict of (level, position) to bytes
        Inner nodes as the store keeps them.
    checkpoints : sequence of Checkpoint
        Heads of the past.
    """

    def __init__(
        self,
        findings: Findings,
        nodes: dict[tuple[int, int], bytes],
        checkpoints: Sequence[Checkpoint] = (),
    ) -> None:
        self.size = 0
        self.versions: list[tuple[int, int]] = []
        self._findings = findings
        self._nodes = nodes
        self._kept = len(nodes)
        self._hash = ""
        self._known = ""
        self._frontier = Frontier()
        self._waiting = sorted(checkpoints, key=lambda checkpoint: checkpoint.size, reverse=True)
        self._met = (0, len(self._waiting))  # size of the last checkpoint that agreed; how many there are
        for check in (2, 3, 4, 6, 7, 10):
            findings.seen[check] = ""

    def links(self, page: Sequence[ChainRow]) -> None:
        """Check numbers, hashes and links of one page (checks 2, 3 and 4).

        Parameters
        ----------
        page : sequence of (seq, canonical bytes, hash)
            The entries that follow.
        """
        try:
            self.size, self._hash = check_links(page, size=self.size, previous=self._hash)
        except (LedgerError, TypeError, AttributeError):
            # Something in this page is wrong: go through it again slowly and name every place.
            for row in page:
                self._slow(*row)

    def _slow(self, seq: int, canonical: object, digest: object) -> None:
        add, expected = self._findings.add, self.size
        self.size = seq + 1
        if seq != expected:
            places = f"entry {expected} is" if seq == expected + 1 else f"entries {expected} to {seq - 1} are"
            add(2, f"{places} missing before it.", seq=seq, found=seq, expected=expected)
        if not isinstance(canonical, bytes):
            add(3, "its canonical bytes are no bytes.", seq=seq, found=canonical)
            self._hash = ""
            return
        if stated_seq(canonical) != seq:
            found = f"{stated_seq(canonical)} inside its bytes"
            add(2, "its bytes bear another number.", seq=seq, found=found, expected=seq)
        made = sha256(canonical)
        if digest != made.digest():
            shown = digest.hex() if isinstance(digest, bytes) else digest
            add(3, "its bytes do not give its hash.", seq=seq, found=made.hexdigest(), expected=shown)
        if stated_previous(canonical) != self._hash:
            found = stated_previous(canonical) or "no hash"
            add(
                4,
                "it does not follow the entry before it.",
                seq=seq,
                found=found,
                expected=self._hash or "no hash",
            )
        self._hash = made.hexdigest()

    def clock(self, page: Sequence[LedgerRow]) -> None:
        """Check that nothing was known before the entry before it (part of check 7).

        Parameters
        ----------
        page : sequence of LedgerRow
            The same entries.
        """
        times = [str(row[4]) for row in page]
        if times[0] < self._known or times != sorted(times):
            earlier = self._known
            for row, known in zip(page, times, strict=True):
                if known < earlier:
                    text = "it was known before the entry before it."
                    self._findings.add(7, text, seq=row[0], found=known, expected=f"{earlier} or later")
                earlier = known
        self._known = times[-1]

    def grow(self, page: Sequence[ChainRow]) -> None:
        """Let the tree grow over one page (checks 6 and 10).

        Parameters
        ----------
        page : sequence of (seq, canonical bytes, hash)
            The same entries.
        """
        frontier = self._frontier
        for seq, canonical, _ in page:
            if self._waiting and self._waiting[-1].size <= frontier.size:
                self._meet()
            data = canonical if isinstance(canonical, bytes) else str(canonical).encode("utf-8", "replace")
            if _VERSION in data:
                self._version(seq, data)
            for level, position, made in frontier.add(sha256(b"\x00" + data).digest()):
                if level >= KEPT_LEVEL and self._nodes.pop((level, position), None) != made:
                    self._findings.add(
                        6,
                        f"node {position} of level {level} is missing or is not the hash of its entries.",
                        seq=seq,
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
        for check in (2, 3, 4):
            self._findings.seen[check] = f"{total} entries"
        self._findings.seen[6] = f"{len(self.versions)} versions, {self._kept} kept nodes"
        count = self._met[1]
        self._findings.seen[10] = f"{count} checkpoints" if count else "not checked: none was given"
