"""Copies of a store: the whole file while it is in use, or its entries laid down again elsewhere."""

from __future__ import annotations

import os
import sqlite3
from collections.abc import Iterable, Iterator
from contextlib import closing
from itertools import groupby, islice
from pathlib import Path

from sqlalchemy import Engine

from treering.errors import EntryHashError, StoreError
from treering.records.entry import NewEntry
from treering.store import reader
from treering.store.canonical import parse
from treering.store.connection import explained, translated, writing
from treering.store.plan import plan
from treering.terms import Cause, EntryKind

_CHUNK = 5000


def backup(engine: Engine, path: Path) -> None:
    """Copy the file of a SQLite store as it stands at one moment; writers and readers go on.

    Parameters
    ----------
    engine : Engine
        Of a store on SQLite.
    path : Path
        File to make; it appears only when the copy is complete.

    Raises
    ------
    StoreError
        When there is a file already or the place cannot be written to.
    """
    partial = prepare(path)
    with translated("copy"):
        source = engine.raw_connection()
        try:
            with closing(sqlite3.connect(partial)) as target:
                source.driver_connection.backup(target)  # type: ignore[union-attr]
        except sqlite3.Error:
            partial.unlink(missing_ok=True)
            raise
        finally:
            source.close()
    finish(partial, path)


def prepare(path: Path) -> Path:
    """Return the file to write a copy to before it is given its name.

    Parameters
    ----------
    path : Path
        Name of the complete copy.

    Returns
    -------
    Path
        A file beside it that does not exist.

    Raises
    ------
    StoreError
        When the name is taken or the folder cannot be written to.
    """
    if path.exists():
        raise StoreError(
            "There is a file at the place of the copy.",
            file=str(path),
            next_step="Choose another name; a copy never overwrites a file.",
        )
    partial = path.with_name(path.name + ".partial")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        for ending in ("", "-wal", "-shm"):  # what a copy that was killed has left
            partial.with_name(partial.name + ending).unlink(missing_ok=True)
    except OSError as error:
        raise explained(str(error), "readonly", "copy") from error
    return partial


def finish(partial: Path, path: Path) -> None:
    """Give a complete copy its name, once it is safely on disk.

    Parameters
    ----------
    partial, path : Path
        The file written, and its name.
    """
    descriptor = os.open(partial, os.O_RDONLY)
    os.fsync(descriptor)
    os.close(descriptor)
    partial.replace(path)


def restore(engine: Engine, canonicals: Iterable[bytes], statements: dict[str, str]) -> None:
    """Lay down entries again from their canonical bytes, after those that are there; all or none.

    Parameters
    ----------
    engine : Engine
        Of the store to fill.
    canonicals : iterable of bytes
        Canonical bytes of the entries that follow the last one there.
    statements : dict of str to str
        INSERT statement of each table.

    Raises
    ------
    StoreError
        When an entry breaks a rule of the ledger, or would not get the same bytes again.
    """
    with writing(engine, lock="entry") as connection:
        tail = reader.read_tail(connection, None)
        for known_at, group in groupby(_parsed(canonicals), key=lambda item: item[2]):
            for chunk in _chunks(group):
                tips = reader.tips_of(connection, [entry.key for _, entry, _ in chunk])
                first = tail.size
                batch = plan((entry for _, entry, _ in chunk), known_at=known_at, tail=tail, tips=tips)
                given = [canonical for canonical, _, _ in chunk]
                _compare(given, [row[-1] for row in batch.ledger], first)
                reader.write_batch(connection, batch, statements)


_Item = tuple[bytes, NewEntry, str]


def _parsed(canonicals: Iterable[bytes]) -> Iterator[_Item]:
    for canonical in canonicals:
        try:
            value = parse(canonical)
            entry = NewEntry(
                EntryKind(value["kind"]),
                value["key"],
                value["body"],
                value["true_at"],
                value["by"],
                None if value["cause"] is None else Cause(value["cause"]),
                value["reason"],
                value["replaces"],
            )
            yield canonical, entry, value["known_at"]
        except (ValueError, KeyError, TypeError) as error:
            raise StoreError(
                "These bytes are no entry of an evidence store.",
                found=canonical[:80],
                next_step="Export the entries again from the store they come from.",
            ) from error


def _chunks(items: Iterable[_Item]) -> Iterator[list[_Item]]:
    iterator = iter(items)
    while chunk := list(islice(iterator, _CHUNK)):
        yield chunk


def _compare(given: list[bytes], made: list[bytes], first: int) -> None:
    """Check that laying entries down again gave the same bytes."""
    for offset, canonical in enumerate(given):
        if offset >= len(made) or made[offset] != canonical:
            raise EntryHashError(
                f"Entry {first + offset} cannot be laid down again with the same bytes.",
                found=made[offset][-160:] if offset < len(made) else "an entry that repeats the one before",
                expected=canonical[-160:],
                next_step="The entries were altered or are not in order: take them from the store again.",
            )
