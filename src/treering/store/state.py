"""The state of the evidence at one moment: a pure value over ledger rows, read as entries or as tables."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from typing import Any

import pandas as pd

from treering.records.entry import NewEntry
from treering.store.chain import Tip
from treering.store.entries import LedgerRow, StoredEntry, stored
from treering.store.plan import provisional
from treering.store.projection import BODY_FIELDS
from treering.terms import EntryKind

_ENVELOPE = ("seq", "key", "true_at", "known_at", "by", "cause", "reason", "replaces", "hash")


class State:
    """Entries as they stood at one moment.

    Per key the last entry counts: it is live unless it is a withdrawal. Entries are built when they are
    asked for, so that reading one kind of a large review stays quick.

    Parameters
    ----------
    rows : iterable of LedgerRow
        All entries of the moment in the order of the ledger.
    """

    def __init__(self, rows: Iterable[LedgerRow]) -> None:
        self._rows: dict[int, LedgerRow] = {}
        self._kinds: dict[str, list[LedgerRow]] = {}
        self._tips: dict[str, LedgerRow] = {}
        self._built: dict[int, StoredEntry] = {}
        for row in rows:
            self._rows[row[0]] = row
            self._tips[row[2]] = row
            self._kinds.setdefault(row[1], []).append(row)

    def __len__(self) -> int:
        """Return the number of entries, live or not."""
        return len(self._rows)

    def live(self, kind: EntryKind | str) -> list[StoredEntry]:
        """Return the entries of a kind that are neither replaced nor withdrawn.

        Parameters
        ----------
        kind : EntryKind
            Kind of entry.

        Returns
        -------
        list of StoredEntry
            Ordered by key.
        """
        tips = self._tips
        rows = [row for row in self._kinds.get(EntryKind(kind), ()) if tips[row[2]] is row]
        return [self._entry(row) for row in sorted(rows, key=lambda row: row[2])]

    def get(self, key: str) -> StoredEntry | None:
        """Return the live entry on a key.

        Parameters
        ----------
        key : str
            Key of the entry.

        Returns
        -------
        StoredEntry or None
            None when there is none or it was withdrawn.
        """
        row = self._tips.get(key)
        return None if row is None or row[1] == EntryKind.WITHDRAWAL else self._entry(row)

    def at(self, seq: int) -> StoredEntry | None:
        """Return the entry with a sequence number.

        Parameters
        ----------
        seq : int
            Place in the ledger.

        Returns
        -------
        StoredEntry or None
            None when it is not part of this state.
        """
        row = self._rows.get(seq)
        return None if row is None else self._entry(row)

    def all(self, kind: EntryKind | str) -> list[StoredEntry]:
        """Return every entry of a kind, replaced and withdrawn ones included.

        Parameters
        ----------
        kind : EntryKind
            Kind of entry.

        Returns
        -------
        list of StoredEntry
            In the order of the ledger.
        """
        return [self._entry(row) for row in self._kinds.get(EntryKind(kind), ())]

    def history(self, key: str) -> list[StoredEntry]:
        """Return every entry on a key, withdrawals included.

        Parameters
        ----------
        key : str
            Key of the entries.

        Returns
        -------
        list of StoredEntry
            In the order of the ledger.
        """
        return [self._entry(row) for row in self._rows.values() if row[2] == key]

    def everything(self) -> Iterator[StoredEntry]:
        """Yield every entry in the order of the ledger.

        Yields
        ------
        StoredEntry
            Replaced and withdrawn ones included.
        """
        yield from map(self._entry, self._rows.values())

    def after(self, entries: Iterable[NewEntry], *, known_at: str) -> State:
        """Return the state that appending `entries` would leave; nothing is written.

        Parameters
        ----------
        entries : iterable of NewEntry
            In order; one that repeats the last entry on its key adds nothing.
        known_at : str
            When they would become known, ISO date-time.

        Returns
        -------
        State
            This one when nothing is added. The added entries have their places but no chained hashes.

        Raises
        ------
        StoreError
            When an entry breaks a rule of the ledger.
        """
        tips = {key: Tip(row[0], row[1], row[3], row[10]) for key, row in self._tips.items()}
        size = max(self._rows, default=-1) + 1
        added = provisional(entries, known_at=known_at, size=size, tips=tips)
        return State([*self._rows.values(), *added]) if added else self

    def without(self, dropped: Callable[[StoredEntry], bool]) -> State:
        """Return the state without the entries for which `dropped` is true.

        Parameters
        ----------
        dropped : callable
            Is asked for each entry.

        Returns
        -------
        State
            Places and hashes stay as they are.
        """
        return State(row for row in self._rows.values() if not dropped(self._entry(row)))

    def frame(self, kind: EntryKind | str, *, history: bool = False) -> pd.DataFrame:
        """Return the entries of a kind as a table.

        Parameters
        ----------
        kind : EntryKind
            Kind of entry.
        history : bool, optional
            With the replaced and withdrawn ones.

        Returns
        -------
        DataFrame
            The fields of the body as columns (those with a column in the store first), then seq, key,
            true_at, known_at, by, cause, reason, replaces and hash; one of these that shares its name with a
            field of the body is called entry_NAME.
        """
        kind = EntryKind(kind)
        entries = self.all(kind) if history else self.live(kind)
        known = BODY_FIELDS[kind]
        others = sorted({name for entry in entries for name in entry.body}.difference(known))
        fields = [*known, *others]
        columns: dict[str, list[Any]] = {name: [entry.body.get(name) for entry in entries] for name in fields}
        for name in _ENVELOPE:
            label = f"entry_{name}" if name in columns else name
            columns[label] = [getattr(entry, name) for entry in entries]
        return pd.DataFrame(columns)

    def _entry(self, row: LedgerRow) -> StoredEntry:
        entry = self._built.get(row[0])
        if entry is None:
            entry = self._built[row[0]] = stored(row)
        return entry
