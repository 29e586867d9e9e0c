"""Copies made while a store is in use, and entries laid down again elsewhere with the same hashes."""

from __future__ import annotations

import sqlite3
import threading

import pytest

from treering import store
from treering.errors import EntryHashError, LedgerError, StoreError
from treering.records import NewEntry
from treering.store.chain import check_links
from treering.terms import EntryKind


@pytest.fixture
def in_use(evidence, study, version, moment):
    """A store with two runs, a correction, a withdrawal and a version."""
    evidence.append([study(f"T{number}") for number in range(300)], known_at=moment)
    gone = NewEntry(EntryKind.WITHDRAWAL, "study/T2", {"reason": "x"}, "2026-05-02", replaces=2)
    later = "2026-05-11T06:00:00Z"
    evidence.append([study("T1", replaces=1, year=1999.5e3 / 1e3 + 0.5), gone, version(1)], known_at=later)
    return evidence


def test_copy_is_the_same_store(in_use, tmp_path):
    in_use.copy(tmp_path / "copies" / "copy.db")
    with store.open_store(tmp_path / "copies" / "copy.db") as copy:
        assert (copy.head(), copy.review) == (in_use.head(), "invented review")
        assert list(copy.chain_rows()) == [
            (seq, bytes(canonical), bytes(digest)) for seq, canonical, digest in in_use.chain_rows()
        ]
        assert copy.versions() == in_use.versions()
        assert list(copy.typed_rows(EntryKind.STUDY)) == list(in_use.typed_rows(EntryKind.STUDY))
    assert [path.name for path in (tmp_path / "copies").iterdir()] == ["copy.db"]


def test_copy_never_overwrites(in_use, tmp_path):
    (tmp_path / "copy.db").write_text("something of value")
    with pytest.raises(StoreError, match="never overwrites"):
        in_use.copy(tmp_path / "copy.db")
    assert (tmp_path / "copy.db").read_text() == "something of value"


def test_remains_of_a_killed_copy_are_no_hindrance(in_use, tmp_path):
    for ending in ("", "-wal", "-shm"):
        (tmp_path / f"copy.db.partial{ending}").write_bytes(b"remains" * 1000)
    in_use.copy(tmp_path / "copy.db")
    with store.open_store(tmp_path / "copy.db") as copy:
        assert copy.head() == in_use.head()


def test_copy_of_a_store_that_is_written_to_is_whole(sqlite_evidence, study, moment, tmp_path):
    stop = threading.Event()

    def write():
        batch = 0
        while not stop.is_set():
            sqlite_evidence.append([study(f"W{batch}-{n}") for n in range(50)], known_at=moment)
            batch += 1

    writer = threading.Thread(target=write)
    writer.start()
    for number in range(4):
        sqlite_evidence.copy(tmp_path / f"copy{number}.db")
    stop.set()
    writer.join()
    for number in range(4):
        with store.open_store(tmp_path / f"copy{number}.db") as copy:
            size, _ = check_links(copy.chain_rows())
            assert size % 50 == 0
            assert copy.head() == sqlite_evidence.head(size)


def test_entries_laid_down_again_have_the_same_head(in_use, place):
    with store.create(place, review="x") as other:
        other.restore(canonical for _, canonical, _ in in_use.chain_rows())
        assert other.head() == in_use.head()
        assert list(other.entries()) == list(in_use.entries())
        other.restore([])
        assert other.head() == in_use.head()


def test_entries_can_be_laid_down_in_parts_but_not_twice(in_use, tmp_path):
    canonicals = [canonical for _, canonical, _ in in_use.chain_rows()]
    with store.create(tmp_path / "other.db", review="x") as other:
        other.restore(canonicals[:100])
        other.restore(canonicals[100:])
        assert other.head() == in_use.head()
        with pytest.raises(LedgerError):
            other.restore(canonicals[:1])


@pytest.mark.parametrize("altered", ["reordered", "changed", "cut", "foreign"])
def test_altered_entries_are_not_laid_down(in_use, tmp_path, altered):
    rows = [bytes(canonical) for _, canonical, _ in in_use.chain_rows()]
    rows = {
        "reordered": [rows[1], rows[0], *rows[2:]],
        "changed": [*rows[:5], rows[5].replace(b"Invented", b"Inverted"), *rows[6:]],
        "cut": rows[1:],
        "foreign": [*rows[:5], b'{"kind":"study"}'],
    }[altered]
    with store.create(tmp_path / "other.db", review="x") as other:
        with pytest.raises((EntryHashError, StoreError), match=r"laid down again|no entry"):
            other.restore(rows)
        assert other.head().size == 0


def test_copy_needs_no_other_file(sqlite_evidence, study, moment, tmp_path):
    sqlite_evidence.append([study("T1")], known_at=moment)
    sqlite_evidence.copy(tmp_path / "copy.db")
    connection = sqlite3.connect(f"file:{tmp_path / 'copy.db'}?immutable=1", uri=True)
    assert connection.execute("SELECT count(*) FROM entry").fetchone() == (1,)
    connection.close()
