"""Columns and typed tables compared with the canonical bytes they repeat; the bytes are the evidence."""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from functools import cache
from typing import Any

from sqlalchemy import JSON, Engine

from treering.errors import StoreError
from treering.store import reader
from treering.store.canonical import canonical_bytes, parse, parse_canonical
from treering.store.connection import reading
from treering.store.entries import ROW_FIELDS, LedgerRow, row_of
from treering.store.models import METADATA, TABLES
from treering.store.projection import project, typed_values
from treering.terms import EntryKind

_CHUNK = 5000
_ENCODE = json.JSONEncoder(separators=(",", ":"), ensure_ascii=False, allow_nan=False).encode


@dataclass(frozen=True, slots=True)
class Difference:
    """One place where the database does not say what the canonical bytes say.

    Parameters
    ----------
    seq : int
        Entry.
    table, column : str
        Where it differs; column is "row" for a missing or surplus row and "canonical" for bytes that are not
        the canonical form of what they hold.
    found, expected : object
        What is stored, and what the bytes ask for.
    """

    seq: int
    table: str
    column: str
    found: object
    expected: object


def differences(engine: Engine, since: int, until: int) -> Iterator[Difference]:
    """Compare entries with their canonical bytes.

    Parameters
    ----------
    engine : Engine
        Engine of the store.
    since, until : int
        First sequence number, and the one after the last.

    Yields
    ------
    Difference
        None for a sound store.
    """
    for start in range(since, until, _CHUNK):
        stop = min(start + _CHUNK, until)
        yield from row_differences(engine, list(reader.ledger_rows(engine, start, stop)), start, stop)


def row_differences(
    engine: Engine, rows: Iterable[LedgerRow], since: int, until: int
) -> Iterator[Difference]:
    """Compare ledger rows that were read already with their canonical bytes, and typed rows with both.

    Parameters
    ----------
    engine : Engine
        Engine of the store.
    rows : iterable of LedgerRow
        All rows from `since` on, before `until`; a few thousand.
    since, until : int
        First sequence number, and the one after the last.

    Yields
    ------
    Difference
        None for a sound store.
    """
    with reading(engine) as connection:
        typed = {
            kind: {row[0]: row for row in reader.fetch(connection, query, since, until)}
            for kind, query in _typed_queries(engine.dialect.name).items()
        }
    for row in rows:
        yield from _entry_differences(row, typed)
    for kind, left in typed.items():
        for seq in left:
            yield Difference(seq, str(TABLES[kind].__tablename__), "row", "a row", "no row")


@cache
def _typed_queries(dialect: str) -> dict[EntryKind, str]:
    return {kind: _typed_query(dialect, kind) for kind in EntryKind}


def _typed_query(dialect: str, kind: EntryKind) -> str:
    """Return the query for typed rows as the driver took them; lists and tables as their text."""
    table = METADATA.tables[str(TABLES[kind].__tablename__)]
    columns = []
    for column in table.columns:
        text = isinstance(column.type, JSON) and dialect == "postgresql"
        columns.append(f'CAST("{column.name}" AS TEXT)' if text else f'"{column.name}"')
    return f'SELECT {", ".join(columns)} FROM "{table.name}" WHERE entry >= ? AND entry < ?'


_Typed = dict[EntryKind, dict[int, tuple[Any, ...]]]


def _entry_differences(row: LedgerRow, typed: _Typed) -> Iterator[Difference]:
    """Yield the differences of one entry, and take its typed row out of those left over."""
    seq, canonical = row[0], row[-1]
    try:
        value = parse_canonical(canonical)
        expected = row_of(value, canonical, row[9])
        kind, body = EntryKind(expected[1]), value["body"]
        wanted = project(kind, seq, body, key=expected[2])
    except (KeyError, TypeError, ValueError, AttributeError, StoreError) as error:
        start: object = canonical[:80] if isinstance(canonical, bytes) else canonical
        yield Difference(seq, "entry", "canonical", start, f"an entry in canonical form ({error})")
        return
    if row[:-2] != expected[:-2]:
        for name, found, right in zip(ROW_FIELDS, row, expected, strict=True):
            if found != right:
                yield Difference(seq, "entry", name, found, right)
    found_row = typed[kind].pop(seq, None)
    if found_row != wanted:
        yield from _typed_differences(typed_values(kind, seq, body, key=expected[2]), kind, found_row)


def _typed_differences(
    wanted: dict[str, Any], kind: EntryKind, found: tuple[Any, ...] | None
) -> Iterator[Difference]:
    """Compare a typed row value by value: equal lists and tables may be written differently."""
    table, seq = str(TABLES[kind].__tablename__), wanted["entry"]
    if found is None:
        yield Difference(seq, table, "row", "no row", "a row")
        return
    columns = METADATA.tables[table].columns
    for (name, right), stored in zip(wanted.items(), found, strict=True):
        is_json = isinstance(columns[name].type, JSON)
        value = _plain(stored) if is_json else stored
        # 1 and true are equal in Python and differ as JSON.
        if value != right or (is_json and canonical_bytes(value) != canonical_bytes(right)):
            yield Difference(seq, table, name, value, right)


def _plain(stored: Any) -> Any:
    """Return the value of JSON text; text that treering would not write so is returned as it is."""
    try:
        if isinstance(stored, str) and _ENCODE(json.loads(stored)) == stored:
            return parse(stored.encode())
    except ValueError:
        pass  # no JSON at all
    return stored
