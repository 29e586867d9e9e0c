"""The evidence store: the only door by which entries get into its database."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path

from sqlalchemy import Engine

from treering.records.entry import NewEntry
from treering.store import copying, reader
from treering.store.chain import known_time
from treering.store.connection import engine_for, set_write_ahead, store_url, writing
from treering.store.entries import Head, StoredEntry, stored
from treering.store.lock import Lock, PostgresLock, SqliteLock
from treering.store.models import METADATA
from treering.store.plan import Tail, plan
from treering.store.reads import StoreReader
from treering.store.schema import lay_out


class EvidenceStore(StoreReader):
    """An append-only ledger of entries with typed tables beside it.

    Made by :func:`create` and :func:`open_store`.

    Parameters
    ----------
    engine : Engine
        Engine on an up-to-date store.
    """

    def __init__(self, engine: Engine) -> None:
        super().__init__(engine)
        self._mutex = threading.RLock()
        self._tail: Tail | None = None
        self._lock: Lock | None = None
        self._statements = _insert_statements(engine)

    @contextmanager
    def exclusive(self) -> Iterator[None]:
        """Hold the lock that lets one update run at a time.

        Yields
        ------
        None
            Until the block ends or the process dies; reading needs no lock.

        Raises
        ------
        StoreBusyError
            When another update holds it.
        """
        lock: Lock
        if self._engine.dialect.name == "sqlite":
            lock = SqliteLock(Path(str(self._engine.url.database)))
        else:
            lock = PostgresLock(self._engine)
        self._lock = lock
        try:
            yield
        finally:
            self._lock = None
            lock.release()

    def check_exclusive(self) -> None:
        """Check that the lock taken by :meth:`exclusive` is still held.

        Raises
        ------
        StoreError
            When it was lost (the server was restarted, the lock file removed): another update may have begun.
        """
        if self._lock is not None:
            self._lock.check()

    def append(
        self,
        entries: Iterable[NewEntry],
        *,
        known_at: str | datetime,
        then: Callable[[Head], Iterable[NewEntry]] | None = None,
    ) -> list[StoredEntry]:
        """Lay down entries in one transaction: all of them or, on any error, none.

        An entry that equals the last one on its key (kind, body, true_at and by) is skipped, so that a run
        repeated adds nothing. A version without `entries` and `root` gets those of the ledger before it.

        Parameters
        ----------
        entries : iterable of NewEntry
            In order.
        known_at : str or datetime
            When the run began, with offset from UTC; the same for all entries of a run.
        then : callable, optional
            Is given the head of the tree over everything up to `entries` and returns further entries for the
            same transaction: a version and the notices that print its head.

        Returns
        -------
        list of StoredEntry
            Those that are new.

        Raises
        ------
        StoreError
            When an entry breaks a rule of the ledger or cannot be stored; `StoreBusyError` when another
            writer does not end.
        """
        given, moment = list(entries), known_time(known_at)
        with self._mutex:
            self.check_exclusive()
            with writing(self._engine, lock="entry") as connection:
                tail = reader.read_tail(connection, self._tail)
                tips = reader.tips_of(connection, [entry.key for entry in given])
                batches = [plan(given, known_at=moment, tail=tail, tips=tips)]
                if then is not None:
                    more = list(then(Head(tail.size, tail.frontier.root().hex())))
                    tips |= reader.tips_of(connection, [e.key for e in more if e.key not in tips])
                    batches.append(plan(more, known_at=moment, tail=tail, tips=tips))
                for batch in batches:
                    reader.write_batch(connection, batch, self._statements)
            self._tail = tail
        return [stored(row) for batch in batches for row in batch.ledger]

    def copy(self, path: str | Path) -> None:
        """Copy the store into a new SQLite file; updates and readers go on meanwhile.

        Parameters
        ----------
        path : str or Path
            File to make; it appears only when the copy is complete.

        Raises
        ------
        StoreError
            When there is a file already or the place cannot be written to.
        """
        target = Path(path)
        if self._engine.dialect.name == "sqlite":
            copying.backup(self._engine, target)
            return
        partial = copying.prepare(target)
        engine = engine_for(store_url(partial))
        set_write_ahead(engine)
        lay_out(engine, self.review)
        with EvidenceStore(engine) as made:
            made.restore(canonical for _, canonical, _ in self.chain_rows())
        copying.finish(partial, target)

    def restore(self, canonicals: Iterable[bytes]) -> None:
        """Lay down entries of another store, from their canonical bytes and with the same hashes.

        Parameters
        ----------
        canonicals : iterable of bytes
            The entries that follow the last one here; all of them for an empty store.

        Raises
        ------
        StoreError
            When they do not follow, or break a rule of the ledger; nothing is stored then.
        """
        with self._mutex:
            copying.restore(self._engine, canonicals, self._statements)


def _insert_statements(engine: Engine) -> dict[str, str]:
    """Return the INSERT statement of each table, with values by position."""
    quote = engine.dialect.identifier_preparer.quote
    mark = "?" if engine.dialect.name == "sqlite" else "%s"
    statements = {}
    for name, table in METADATA.tables.items():
        columns = ", ".join(quote(column.name) for column in table.columns)
        marks = ", ".join(mark for _ in table.columns)
        statements[name] = f"INSERT INTO {quote(name)} ({columns}) VALUES ({marks})"
    return statements
