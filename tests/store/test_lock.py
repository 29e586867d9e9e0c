"""One update at a time; readers and the lock of a dead process stand in nobody's way."""

from __future__ import annotations

import subprocess
import sys
import threading
from pathlib import Path

import pytest

from treering import store
from treering.errors import StoreBusyError, StoreError
from treering.store import connection
from treering.store.chain import check_links
from treering.terms import EntryKind

HOLDER = Path(__file__).parent / "scripts" / "holder.py"


def test_second_update_is_told_that_one_runs(evidence, target):
    with store.open_store(target) as other:
        with evidence.exclusive():
            with pytest.raises(StoreBusyError, match=r"Another update.*Wait until it has ended"):
                other.exclusive().__enter__()
            with pytest.raises(StoreBusyError):
                evidence.exclusive().__enter__()
        with other.exclusive():
            pass


def test_lock_is_free_again_after_an_error(evidence):
    with pytest.raises(ZeroDivisionError), evidence.exclusive():
        raise ZeroDivisionError
    with evidence.exclusive():
        pass


def test_readers_need_no_lock(evidence, target, study, moment):
    with evidence.exclusive(), store.open_store(target) as other:
        evidence.append([study("T1")], known_at=moment)
        assert other.state().get("study/T1").seq == 0


def test_lock_dies_with_its_process(evidence, target):
    command = [sys.executable, str(HOLDER), target]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as holder:
        assert holder.stdout.readline() == "held\n"
        with pytest.raises(StoreBusyError), evidence.exclusive():
            pass
        holder.kill()
        holder.wait()
    wait_for_lock(evidence)


def wait_for_lock(evidence):
    """Take the lock; a PostgreSQL server needs a moment to see that its client is gone."""
    for _ in range(100):
        try:
            with evidence.exclusive():
                return
        except StoreBusyError:
            threading.Event().wait(0.05)
    pytest.fail("the lock outlived its process")


def test_readers_see_the_state_before_while_an_append_is_under_way(evidence, target, study, moment):
    seen = []

    def meanwhile(head):
        with store.open_store(target) as other:
            seen.append((other.head().size, len(other.state().live(EntryKind.STUDY))))
        return []

    evidence.append([study("T0")], known_at=moment)
    evidence.append([study(f"U{number}") for number in range(500)], known_at=moment, then=meanwhile)
    assert seen == [(1, 1)]
    assert evidence.head().size == 501


def test_second_writer_waits_and_is_told_when_it_takes_too_long(target, study, moment, monkeypatch):
    monkeypatch.setattr(connection, "_WAIT_SECONDS", 0.2)
    with store.open_store(target) as first, store.open_store(target) as second:

        def meanwhile(head):
            with pytest.raises(StoreBusyError, match="Another writer holds the store"):
                second.append([study("U1")], known_at=moment)
            return []

        first.append([study("T1")], known_at=moment, then=meanwhile)
        assert [entry.key for entry in second.entries()] == ["study/T1"]
        second.append([study("U1")], known_at=moment)


def test_two_writers_never_interleave(evidence, target, study, moment):
    failures = []

    def write(name):
        try:
            with store.open_store(target) as own:
                for batch in range(8):
                    own.append([study(f"{name}-{batch}-{n}") for n in range(20)], known_at=moment)
        except StoreError as error:
            failures.append(error)

    writers = [threading.Thread(target=write, args=(name,)) for name in "AB"]
    for writer in writers:
        writer.start()
    for writer in writers:
        writer.join()
    assert failures == []
    keys = [entry.key.rsplit("-", 1)[0] for entry in evidence.entries()]
    batches = [set(keys[start : start + 20]) for start in range(0, len(keys), 20)]
    assert len(keys) == 320
    assert all(len(batch) == 1 for batch in batches)
    assert check_links(evidence.chain_rows())[0] == 320


def test_update_whose_lock_was_lost_stores_nothing_more(cluster, postgres_url, study, moment):
    store.create(postgres_url, review="x").close()
    with store.open_store(postgres_url) as opened:
        with opened.exclusive():
            cluster.stop()
            cluster.start()
            with pytest.raises(StoreError, match=r"lock of this update was lost.*run the update again"):
                opened.append([study("T1")], known_at=moment)
        assert opened.head().size == 0
        with opened.exclusive():
            opened.append([study("T1")], known_at=moment)


def test_update_whose_lock_file_was_removed_stores_nothing_more(sqlite_evidence, study, moment):
    lock = Path(sqlite_evidence.place + ".lock")
    with store.open_store(sqlite_evidence.place) as other, sqlite_evidence.exclusive():
        lock.unlink()
        with other.exclusive(), pytest.raises(StoreError, match=r"lock of this update was lost.*removed"):
            sqlite_evidence.append([study("T1")], known_at=moment)
    assert sqlite_evidence.head().size == 0
