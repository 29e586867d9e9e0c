"""What is read from a store: states, heads, proofs, entries; nothing here needs a lock."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import datetime
from typing import Any, Self

from sqlalchemy import Engine

from treering.errors import StoreError
from treering.store import comparing, merkle, reader
from treering.store.chain import ChainRow, known_time, true_date
from treering.store.comparing import Difference
from treering.store.connection import place_of, reading
from treering.store.entries import Head, StoredEntry, stored
from treering.store.state import State
from treering.terms import EntryKind


class StoreReader:
    """The reading half of an evidence store.

    Parameters
    ----------
    engine : Engine
        Engine on an up-to-date store.
    """

    def __init__(self, engine: Engine) -> None:
        self._engine = engine

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

    def __enter__(self) -> Self:
        """Return the store itself."""
        return self

    def __exit__(self, *_: object) -> None:
        """Close all connections."""
        self.close()

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

    def typed_rows(
        self, kind: EntryKind, *, since: int = 0, until: int | None = None
    ) -> Iterator[dict[str, Any]]:
        """Yield the rows of a typed table, for the audit to compare with the canonical bytes.

        Parameters
        ----------
        kind : EntryKind
            Kind of entry.
        since, until
            As for :meth:`entries`.

        Yields
        ------
        dict
            Column to value; what :func:`treering.store.projection.typed_values` gives for a sound store.
        """
        yield from reader.typed_rows(self._engine, kind, since, self._end(until))

    def differences(self, *, since: int = 0, until: int | None = None) -> Iterator[Difference]:
        """Yield where columns and typed tables do not say what the canonical bytes say.

        Parameters
        ----------
        since, until
            As for :meth:`entries`.

        Yields
        ------
        Difference
            None for a sound store.
        """
        yield from comparing.differences(self._engine, since, self._end(until))

    def _end(self, until: int | None) -> int:
        with reading(self._engine) as connection:
            size = reader.size_of(connection)
        return size if until is None else min(until, size)


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
