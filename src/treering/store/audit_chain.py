"""Checks 2, 3, 4 and the clock in one pass over the ledger; memory does not grow with it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from hashlib import sha256

from sqlalchemy import Engine

from treering.errors import LedgerError
from treering.store.chain import ChainRow, check_links, stated_previous, stated_seq
from treering.store.checks import Findings
from treering.store.connection import reading
from treering.store.entries import ROW_FIELDS, LedgerRow
from treering.store.reader import fetch

PAGE = 5120
"""Entries read at a time: twenty of the subtrees whose roots are kept."""

_LOWEST = -(2**63)
_COLUMNS = ", ".join(f'"{name}"' for name in ROW_FIELDS)
_PAGE_QUERY = f"SELECT {_COLUMNS} FROM entry WHERE seq >= ? AND seq < ? ORDER BY seq LIMIT {PAGE}"


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
    """Walks over the ledger once and follows numbers, hashes, links and dates.

    Parameters
    ----------
    findings : Findings
        Where faults are noted.
    """

    def __init__(self, findings: Findings) -> None:
        self.size = 0
        self.count = 0
        self._findings = findings
        self._hash = ""
        self._known = ""
        for check in (2, 3, 4, 7):
            findings.seen[check] = ""

    def links(self, page: Sequence[ChainRow]) -> None:
        """Check numbers, hashes and links of one page (checks 2, 3 and 4).

        Parameters
        ----------
        page : sequence of (seq, canonical bytes, hash)
            The entries that follow.
        """
        self.count += len(page)
        try:
            self.size, self._hash = check_links(page, size=self.size, previous=self._hash)
        except (LedgerError, TypeError, AttributeError):
            # Something in this page is wrong: go through it again slowly and name every place.
            for row in page:
                self._slow(*row)

    def _slow(self, seq: int, canonical: object, digest: object) -> None:
        add, expected = self._findings.add, self.size
        if seq < expected:
            return add(2, "it is numbered before the first entry.", seq=seq, expected=expected)
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

    def finish(self) -> None:
        """Say how many entries were seen."""
        for check in (2, 3, 4):
            self._findings.seen[check] = f"{self.count} entries"
