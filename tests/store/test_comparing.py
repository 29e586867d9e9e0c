"""What is altered in the database against its canonical bytes is found, each place by name."""

from __future__ import annotations

import sqlite3

import pytest

from treering import store
from treering.store.models import METADATA, TABLES
from treering.terms import EntryKind


@pytest.fixture
def copy_of(filled, tmp_path):
    """A SQLite copy of a store with entries of every kind, without its triggers."""
    with store.open_store(filled) as opened:
        opened.copy(tmp_path / "copy.db")
    connection = sqlite3.connect(tmp_path / "copy.db", isolation_level=None)
    for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'").fetchall():
        connection.execute(f"DROP TRIGGER {name}")
    yield connection, tmp_path / "copy.db"
    connection.close()


def found(path):
    with store.open_store(path) as opened:
        return list(opened.differences())


def test_sound_store_shows_no_difference(filled):
    with store.open_store(filled) as opened:
        assert opened.head().size > 256
        assert list(opened.differences()) == []


@pytest.mark.parametrize(
    ("statement", "table", "column", "value"),
    [
        ("UPDATE entry SET key = 'study/Z' WHERE kind = 'study' AND seq < 29", "entry", "key", "study/Z"),
        ("UPDATE entry SET known_at = '2020' WHERE kind = 'run'", "entry", "known_at", "2020"),
        ("UPDATE entry SET replaces = NULL WHERE kind = 'withdrawal'", "entry", "replaces", None),
        ("UPDATE study SET trial = 'Z' WHERE entry < 29", "study", "trial", "Z"),
        ("UPDATE study SET year = 2020 WHERE entry < 29", "study", "year", 2020),
        ('UPDATE extraction SET "values" = \'{"a":1}\'', "extraction", "values", {"a": 1}),
        ("UPDATE extraction SET origins = 'no json'", "extraction", "origins", "no json"),
        ("DELETE FROM result", "result", "row", "no row"),
        ("INSERT INTO result (entry, trial, outcome) VALUES (40, 'a', 'b')", "result", "row", "a row"),
    ],
)
def test_altered_column_is_named(copy_of, statement, table, column, value):
    connection, path = copy_of
    connection.execute(statement)
    (difference,) = found(path)
    assert (difference.table, difference.column, difference.found) == (table, column, value)


@pytest.mark.parametrize("data", [b"{}", b"[1]", b'{"b":1, "a":2}', b"\xff", b'{"body":{},"kind":"cloud"}'])
def test_bytes_that_are_no_canonical_entry_are_named(copy_of, data):
    connection, path = copy_of
    connection.execute("UPDATE entry SET canonical = ? WHERE seq = 3", (data,))
    difference = found(path)[0]
    assert (difference.seq, difference.table, difference.column) == (3, "entry", "canonical")


def test_equal_values_written_differently_are_no_difference(copy_of, study, moment):
    _, path = copy_of
    with store.open_store(path) as opened:
        opened.append([study("Z1", funding={"sum": 12.0, "of": [1e300]})], known_at=moment)
        assert opened.state().get("study/Z1").body["funding"]["sum"] == 12
        assert list(opened.typed_rows(EntryKind.STUDY))[-1]["funding"] == {"sum": 12, "of": [1e300]}
    assert found(path) == []


def other(value):
    """Return a value of the same storage class that differs."""
    if isinstance(value, str):
        return f"{value}x"
    return value + 1 if isinstance(value, int | float) else "x"


def test_any_one_changed_cell_is_found(copy_of):
    connection, path = copy_of
    connection.execute("PRAGMA foreign_keys = OFF")
    tables = [(str(model.__tablename__), "entry") for model in TABLES.values()] + [("entry", "seq")]
    with store.open_store(path) as opened:
        for table, primary in tables:
            for column in (column.name for column in METADATA.tables[table].columns):
                if column in ("entry", "seq", "canonical", "hash"):
                    continue  # the chain rules answer for these; see test_chain.py
                query = f'SELECT {primary}, "{column}" FROM "{table}" ORDER BY {primary} LIMIT 1'
                seq, value = connection.execute(query).fetchone()
                update = f'UPDATE "{table}" SET "{column}" = ? WHERE {primary} = ?'
                connection.execute(update, (other(value), seq))
                found = {
                    (place.seq, place.table, place.column) for place in opened.differences(until=seq + 1)
                }
                assert (seq, table, column) in found
                connection.execute(update, (value, seq))
        assert list(opened.differences()) == []
