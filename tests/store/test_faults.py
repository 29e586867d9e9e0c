"""Faults a store must survive: nothing accepted is lost, nothing is there by half."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from itertools import count
from pathlib import Path

import pytest
from sqlalchemy import event

from treering import store
from treering.errors import KnownDateError, StoreError
from treering.store.chain import check_links
from treering.terms import EntryKind

KILLED = Path(__file__).parent / "scripts" / "killed.py"
NOBODY = 65534


def sound(opened: store.EvidenceStore) -> store.Head:
    """Return the head of a store whose links and typed tables are complete."""
    size, _ = check_links(opened.chain_rows())
    kinds = [entry.kind for entry in opened.entries()]
    for kind in set(kinds):
        assert len(list(opened.typed_rows(kind))) == kinds.count(kind)
    assert opened.head().size == size
    return opened.head()


def test_append_killed_at_any_step_is_there_as_a_whole_or_not_at_all(target, tmp_path):
    done = subprocess.run(
        [sys.executable, str(KILLED), target], capture_output=True, text=True, check=False, timeout=300
    )
    assert done.returncode == 0, done.stderr
    lines = [json.loads(line) for line in done.stdout.splitlines()]
    assert [line["killed"] for line in lines] == [True] * (len(lines) - 2) + [False, True]
    assert len(lines) > 12
    for place, line in enumerate(lines):
        left = line["left"]
        assert left["links"] == left["size"] == left["typed"]
        assert left["size"] in (130 * place, 130 * (place + 1))
        assert left["size"] + line["added"] == 130 * (place + 1)
    assert [line["added"] for line in lines[-2:]] == [0, 0]


def test_error_of_the_caller_half_way_leaves_the_head_unchanged(evidence, study, moment):
    evidence.append([study("T1")], known_at=moment)
    head = sound(evidence)

    def entries():
        yield study("T2")
        yield study("T3")
        raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        evidence.append(entries(), known_at=moment)
    assert sound(evidence) == head


@pytest.mark.parametrize("step", range(8))
def test_error_of_the_database_at_any_step_leaves_the_head_unchanged(evidence, study, moment, step):
    evidence.append([study("T1")], known_at=moment)
    head = sound(evidence)
    steps = count()

    def fail(*_):
        if next(steps) == step:
            raise OSError("invented fault")

    wanted = [study(f"U{number}") for number in range(260)]
    event.listen(evidence._engine, "after_cursor_execute", fail)
    failed = False
    try:
        evidence.append(wanted, known_at=moment)
    except OSError:
        failed = True
    event.remove(evidence._engine, "after_cursor_execute", fail)
    assert failed == (step < next(steps))
    assert step >= 5 or failed, "an append takes at least five statements"
    assert (sound(evidence) == head) == failed
    evidence.append(wanted, known_at=moment)
    assert sound(evidence).size == 261


def test_power_loss_keeps_what_was_committed_and_nothing_else(sqlite_evidence, study, moment, tmp_path):
    source = Path(sqlite_evidence.place)
    log = source.with_name(source.name + "-wal")
    sqlite_evidence.append([study(f"T{number}") for number in range(50)], known_at=moment)
    committed, safe = sqlite_evidence.head(), log.stat().st_size
    copies = []

    def power_fails(*_):
        copies.append((source.read_bytes(), log.read_bytes()))

    event.listen(sqlite_evidence._engine, "after_cursor_execute", power_fails)
    sqlite_evidence.append([study(f"U{number}") for number in range(400)], known_at=moment)
    event.remove(sqlite_evidence._engine, "after_cursor_execute", power_fails)
    whole = sqlite_evidence.head()
    data, written = source.read_bytes(), log.read_bytes()
    assert len(written) > safe
    # Torn writes: the log cut anywhere after the first commit, and cut with noise in place of the rest.
    for cut in range(safe, len(written), (len(written) - safe) // 12):
        copies += [(data, written[:cut]), (data, written[:cut] + b"\x5a" * 5000)]
    for number, (database, frames) in enumerate(copies):
        copy = tmp_path / f"copy{number}.db"
        copy.write_bytes(database)
        copy.with_name(copy.name + "-wal").write_bytes(frames)
        with store.open_store(copy) as opened:
            assert sound(opened) == committed
    (tmp_path / "last.db").write_bytes(data)
    (tmp_path / "last.db-wal").write_bytes(written)
    with store.open_store(tmp_path / "last.db") as opened:
        assert sound(opened) == whole


@contextmanager
def powerless() -> Iterator[None]:
    """Go on without the rights of root, which no file permission stops."""
    if os.geteuid() != 0:
        yield
        return
    os.seteuid(NOBODY)
    try:
        yield
    finally:
        os.seteuid(0)


@pytest.fixture
def open_folder() -> Iterator[Path]:
    """A folder that every account can reach."""
    folder = Path(tempfile.mkdtemp(dir="/tmp"))
    folder.chmod(0o755)
    yield folder
    folder.chmod(0o755)
    shutil.rmtree(folder)


def test_read_only_folder_is_named_with_the_next_step(open_folder, study, moment):
    place = open_folder / "store" / "evidence.db"
    with store.create(place, review="x") as made:
        made.append([study("T1")], known_at=moment)
        head = made.head()
    place.chmod(0o444)
    place.parent.chmod(0o555)
    refusal = "cannot be opened for writing.*Give the account"
    with powerless():
        with pytest.raises(StoreError, match=refusal):
            store.create(place.with_name("new.db"), review="x")
        with pytest.raises(StoreError, match="right to write"):
            store.create(place.parent / "deeper" / "new.db", review="x")
        with pytest.raises(StoreError, match=refusal), store.open_store(place) as opened:
            opened.append([study("T2")], known_at=moment)
        with pytest.raises(StoreError, match=refusal), store.open_store(place) as opened, opened.exclusive():
            pass
    place.parent.chmod(0o755)
    place.chmod(0o644)
    with store.open_store(place) as opened:
        assert sound(opened) == head
        with powerless(), pytest.raises(StoreError, match=refusal):
            opened.copy(place.with_name("copy.db"))


def test_full_database_is_named_and_nothing_is_lost(sqlite_evidence, sqlite_target, study, moment):
    sqlite_evidence.append([study("T1")], known_at=moment)
    head = sqlite_evidence.head()
    with store.open_store(sqlite_target) as cramped:

        def limit(connection, _record):
            pages = connection.execute("PRAGMA page_count").fetchone()[0]
            connection.execute(f"PRAGMA max_page_count = {pages + 5}")

        event.listen(cramped._engine, "connect", limit)
        cramped._engine.dispose()
        with pytest.raises(StoreError, match=r"disk of the store is full.*Free some space"):
            cramped.append([study(f"U{number}") for number in range(500)], known_at=moment)
        assert sound(cramped) == head
        cramped.append([study("T2")], known_at=moment)
    assert sound(sqlite_evidence).size == 2


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A disk of 3 MB in memory; only root may mount one."""
    folder = tmp_path / "disk"
    folder.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", "size=3m", "tmpfs", str(folder)]
    if os.geteuid() != 0 or subprocess.run(command, capture_output=True, check=False).returncode:
        pytest.skip("this account may not mount a small disk")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


def test_full_disk_is_named_and_nothing_is_lost(small_disk, study, moment):
    with store.create(small_disk / "evidence.db", review="x") as made:
        made.append([study("T1")], known_at=moment)
        head = made.head()
        entries = [study(f"U{number}", title="x" * 500) for number in range(3000)]
        with pytest.raises(StoreError, match=r"disk of the store is full.*Free some space"):
            made.append(entries, known_at=moment)
        assert sound(made) == head
        made.append(entries[:50], known_at=moment)
    with store.open_store(small_disk / "evidence.db") as opened:
        assert sound(opened).size == 51


def test_clock_set_back_stores_nothing(evidence, target, study, moment):
    evidence.append([study("T1")], known_at=moment)
    with store.open_store(target) as later, pytest.raises(KnownDateError, match="Set the clock right"):
        later.append([study("T2")], known_at="2025-05-04T06:00:00Z")
    assert sound(evidence).size == 1


def test_server_restarted_half_way_stores_nothing_and_the_run_can_be_repeated(
    cluster, postgres_url, study, version, moment
):
    store.create(postgres_url, review="x").close()
    with store.open_store(postgres_url) as opened:
        opened.append([study("T1")], known_at=moment)
        head = sound(opened)

        def restart(_head):
            cluster.stop()
            cluster.start()
            return [version(1)]

        with pytest.raises(
            StoreError,
            match=r"server cannot be reached.*run again: what was stored already is not stored twice",
        ):
            opened.append([study("T2")], known_at=moment, then=restart)
        assert sound(opened) == head
        opened.append([study("T2")], known_at=moment, then=lambda _head: [version(1)])
        assert sound(opened).size == 3
        assert len(opened.state().live(EntryKind.VERSION)) == 1
