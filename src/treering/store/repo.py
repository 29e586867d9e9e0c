"""The evidence store: the only door between treering and its database."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path
from typing import Any

from sqlalchemy import Engine, insert

from treering.errors import StoreError
from treering.records.entry import NewEntry
from treering.store import merkle, reader
from treering.store.chain import ChainRow, known_time, true_date
from treering.store.connection import engine_for, place_of, reading, store_url, writing
from treering.store.entries import ENTRY_FORMAT, Head, StoredEntry, stored
from treering.store.lock import Lock, PostgresLock, SqliteLock
from treering.store.models import METADATA
from treering.store.plan import Tail, plan
from treering.store.schema import check_revision, migrate, revision_of
from treering.store.state import State


def create(target: str | Path, *, review: str) -> EvidenceStore:
    """Make an empty store.

    Parameters
    ----------
    target : str or Path
        Path of a SQLite file that does not exist yet, or the URL of an empty PostgreSQL database.
    review : str
        Name of the review it belongs to.

    Returns
    -------
    EvidenceStore
        Open and empty.

    Raises
    ------
    StoreError
        When there is a store already, or the place cannot be written to.
    """
    url = store_url(target)
    if url.get_backend_name() == "sqlite":
        _make_folder(Path(str(url.database)).parent)
    engine = engine_for(url)
    try:
        if url.get_backend_name() == "sqlite":
            with reading(engine) as connection:
                connection.connection.rollback()
                connection.connection.cursor().execute("PRAGMA journal_mode=WAL")
        with writing(engine) as connection:
            if revision_of(connection) is not None:
                raise StoreError(
                    "There is a store already.",
                    file=place_of(url),
                    next_step="Open it, or choose another place for a new one.",
                )
            migrate(connection)
            values = {"id": 1, "review": review, "format": ENTRY_FORMAT}
            connection.execute(insert(METADATA.tables["store"]), [values])
    except BaseException:
        engine.dispose()
        raise
    return EvidenceStore(engine)


def open_store(target: str | Path) -> EvidenceStore:
    """Open a store, and bring its tables up to date when an earlier version of treering made it.

    Parameters
    ----------
    target : str or Path
        Path of a SQLite file or a PostgreSQL URL.

    Returns
    -------
    EvidenceStore
        Open.

    Raises
    ------
    StoreError
        When there is none, it is no store, or a later version of treering made it.
    """
    url = store_url(target)
    place = place_of(url)
    if url.get_backend_name() == "sqlite" and not Path(str(url.database)).is_file():
        raise _absent(place)
    engine = engine_for(url)
    try:
        with reading(engine) as connection:
            revision = revision_of(connection)
        if revision is None:
            raise _absent(place)
        if check_revision(revision):
            with writing(engine, lock="entry") as connection:
                migrate(connection)
    except BaseException:
        engine.dispose()
        raise
    return EvidenceStore(engine)


class EvidenceStore:
    """An append-only ledger of entries with typed tables beside it.

    Made by :func:`create` and :func:`open_store`.

    Parameters
    ----------
    engine : Engine
        Engine on an up-to-date store.
    """

    def __init__(self, engine: Engine) -> None:
        self._engine = engine
        self._mutex = threading.RLock()
        self._tail: Tail | None = None
        self._lock: Lock | None = None
        self._statements = _insert_statements(engine)

    @property
    def place(self) -> str:
        """Where the store lies: a path, or a URL without its password."""
        return place_of(self._engine.url)

    @property
    def review(self) -> str:
        """Name of the review the store belongs to."""
        with reading(self._engine) as connection:
            return str(reader.fetch(connection, "SELECT review FROM store")[0][0])

    def close(self) -> None:
        """Close all connections."""
        self._engine.dispose()

    def __enter__(self) -> EvidenceStore:
        """Return the store itself."""
        return self

    def __exit__(self, *_: object) -> None:
        """Close all connections."""
        self.close()

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
            if self._lock is not None:
                self._lock.check()
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

    def state(
        self, *, version: int | None = None, known: str | datetime | None = None, true: str | None = None
    ) -> State:
        """Return the evidence as of one moment.

        Parameters
        ----------
        version : int, optional
            As the numbered version saw it.
        known : str or datetime, optional
            As it was known then: a date (to its end, UTC) or a date-time.
        true : str, optional
            What was true in the world by this date.

        Returns
        -------
        State
            Everything now when no moment is given; all limits together when several are.

        Raises
        ------
        StoreError
            When there is no such version or a date cannot be read.
        """
        known_limit = _known_limit(known) if known is not None else ""
        true_limit = true_date(true) if true is not None else ""
        with reading(self._engine) as connection:
            size = reader.size_of(connection)
            if version is not None:
                size = _size_of_version(
                    reader.fetch(connection, "SELECT entries FROM version WHERE version = ?", version),
                    version,
                )
            return State(reader.rows_as_of(connection, size, known_limit, true_limit))

    def head(self, size: int | None = None) -> Head:
        """Return size and root of the Merkle tree.

        Parameters
        ----------
        size : int, optional
            Of the tree over this many first entries; of all of them by default.

        Returns
        -------
        Head
            What is printed in reports and notices.

        Raises
        ------
        StoreError
            When there are fewer entries.
        """
        with reading(self._engine) as connection:
            total = reader.size_of(connection)
            size = total if size is None else size
            _check_size(size, total)
            return Head(size, merkle.root(size, reader.node_reader(connection)).hex())

    def inclusion_proof(self, seq: int, size: int) -> list[str]:
        """Return the proof that an entry is among the first `size`.

        Parameters
        ----------
        seq : int
            Entry.
        size : int
            Size of the tree whose root is known.

        Returns
        -------
        list of str
            Hexadecimal hashes for :func:`treering.store.merkle.verify_inclusion`.

        Raises
        ------
        StoreError
            When it is not among them.
        """
        with reading(self._engine) as connection:
            _check_size(size, reader.size_of(connection))
            _check_size(seq + 1, size)
            return [step.hex() for step in merkle.inclusion_proof(seq, size, reader.node_reader(connection))]

    def consistency_proof(self, first: int, second: int) -> list[str]:
        """Return the proof that the tree of one size extends that of a smaller one.

        Parameters
        ----------
        first, second : int
            Sizes, 1 <= first <= second.

        Returns
        -------
        list of str
            Hexadecimal hashes for :func:`treering.store.merkle.verify_consistency`.

        Raises
        ------
        StoreError
            When the sizes are out of order or there are fewer entries.
        """
        with reading(self._engine) as connection:
            _check_size(second, reader.size_of(connection))
            _check_size(first, second, least=1)
            return [
                step.hex() for step in merkle.consistency_proof(first, second, reader.node_reader(connection))
            ]

    def versions(self) -> list[dict[str, Any]]:
        """Return the bodies of the versions laid down.

        Returns
        -------
        list of dict
            In order, from version 1.
        """
        query = "SELECT e.* FROM entry e JOIN version v ON v.entry = e.seq ORDER BY e.seq"
        with reading(self._engine) as connection:
            rows = reader.fetch(connection, query)
        return [stored(row).body for row in rows]

    def entries(self, *, since: int = 0, until: int | None = None) -> Iterator[StoredEntry]:
        """Yield the entries in order.

        Parameters
        ----------
        since : int, optional
            First sequence number.
        until : int, optional
            The one after the last; the present end by default.

        Yields
        ------
        StoredEntry
            With body and canonical bytes.
        """
        for row in reader.ledger_rows(self._engine, since, self._end(until)):
            yield stored(row)

    def chain_rows(self, *, since: int = 0, until: int | None = None) -> Iterator[ChainRow]:
        """Yield sequence number, canonical bytes and hash of each entry, for audit and export.

        Parameters
        ----------
        since, until
            As for :meth:`entries`.

        Yields
        ------
        tuple of (int, bytes, bytes)
            In order.
        """
        yield from reader.chain_rows(self._engine, since, self._end(until))

    def _end(self, until: int | None) -> int:
        with reading(self._engine) as connection:
            size = reader.size_of(connection)
        return size if until is None else min(until, size)


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


def _known_limit(known: str | datetime) -> str:
    if isinstance(known, str) and len(known) == 10:
        return f"{true_date(known)}T23:59:59Z"
    return known_time(known)


def _size_of_version(found: list[tuple[Any, ...]], version: int) -> int:
    if not found:
        raise StoreError(
            "There is no such version.", version=version, next_step="See treering history for the versions."
        )
    return int(found[0][0])


def _check_size(size: int, total: int, *, least: int = 0) -> None:
    if not least <= size <= total:
        raise StoreError(
            "The store has no tree of this size.",
            found=size,
            expected=f"{least} to {total}",
            next_step="Check the head or entry asked for against the store.",
        )


def _absent(place: str) -> StoreError:
    return StoreError(
        "There is no evidence store here.",
        file=place,
        next_step="Make one with treering start, or correct store in config/review.toml.",
    )


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(
            "The folder of the store cannot be made.",
            file=str(folder),
            found=error.strerror,
            next_step="Give the account that runs treering the right to write there.",
        ) from error
