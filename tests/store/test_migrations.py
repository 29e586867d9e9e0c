"""Stores of earlier code: they open, nothing in them changes, and the bytes of today are those of then.

The migration to a second revision is one made for this test; the golden store is the one the code of
revision 0001 wrote (tests/store/scripts/lay_golden.py says how), its heads noted on that day.
"""

from __future__ import annotations

import shutil
import sqlite3
from pathlib import Path

import pytest

from treering import store
from treering.errors import StoreError
from treering.store import schema
from treering.store.chain import check_links
from treering.store.connection import engine_for, store_url
from treering.store.triggers import installed_triggers
from treering.terms import EntryKind

GOLDEN_HEAD = store.Head(32, "3300490eae993e78d65ec4eb1184e0f88670d4d5f5543c1c879e416cbd6f646c")
GOLDEN_VERSIONS = [
    (28, "fd0e700c97d671279eb25a5eb8e8458a2b7c7025c6fb44ad6b1e527b5f95b190"),
    (31, "7c0d7586de681abe6e5f119b5b4f8271c0fc696dc6b92fad2b57cc8c5c875acf"),
]
LATER = """
import sqlalchemy as sa
from alembic import op

revision = "0002"
down_revision = "0001"


def upgrade():
    op.add_column("study", sa.Column("setting", sa.String))
    op.create_index("study_trial", "study", ["trial"])
    FAULT
"""


@pytest.fixture
def later_code(tmp_path, monkeypatch):
    """The code of a later release: one revision more."""
    folder = tmp_path / "migrations"
    shutil.copytree(Path(schema.__file__).parent / "migrations", folder)

    def install(fault="pass"):
        (folder / "versions" / "m0002_later.py").write_text(LATER.replace("FAULT", fault))
        monkeypatch.setattr(schema, "_MIGRATIONS", folder)
        monkeypatch.setattr(schema, "HEAD_REVISION", "0002")
        monkeypatch.setattr(schema.migrate, "__kwdefaults__", {"to": "0002"})

    return install


def test_golden_store_still_says_what_it_said(golden):
    with store.open_store(golden) as opened:
        assert opened.head() == GOLDEN_HEAD
        assert [(body["entries"], body["root"]) for body in opened.versions()] == GOLDEN_VERSIONS
        assert check_links(opened.chain_rows())[0] == 32
        assert list(opened.differences()) == []
        assert {entry.kind for entry in opened.entries()} == set(EntryKind)
        assert opened.state(version=1).get("study/T1").body["year"] == 2021
        assert opened.state().get("study/T1").body["year"] == 2020


def test_same_entries_laid_down_today_have_the_heads_of_then(evidence, lay_golden):
    lay_golden(evidence)
    assert evidence.head() == GOLDEN_HEAD
    assert [(body["entries"], body["root"]) for body in evidence.versions()] == GOLDEN_VERSIONS


def test_golden_store_can_be_gone_on_with(golden, study):
    with store.open_store(golden) as opened:
        with pytest.raises(StoreError, match="dated earlier"):
            opened.append([study("T7")], known_at="2026-04-06T06:00:00Z")
        opened.append([study("T7")], known_at="2026-06-01T06:00:00Z")
        assert opened.head(32) == GOLDEN_HEAD


@pytest.fixture
def earlier(place, lay_golden):
    """Where a store of today's revision lies, on each of the two databases in turn."""
    with store.create(place, review="invented golden review") as made:
        lay_golden(made)
    return place


def test_migration_changes_no_hash_and_drops_no_guard(earlier, later_code):
    guarded = installed_triggers_of(earlier)
    later_code()
    with store.open_store(earlier) as opened:
        assert opened.head() == GOLDEN_HEAD
        assert check_links(opened.chain_rows())[0] == 32
        assert installed_triggers_of(earlier) == guarded
        assert revision_of(earlier) == "0002"
    with store.open_store(earlier) as again:
        assert again.head() == GOLDEN_HEAD


def test_opening_to_look_never_migrates(earlier, later_code):
    later_code()
    with pytest.raises(StoreError, match="treering update"):
        store.open_store(earlier, upgrade=False)
    assert revision_of(earlier) == "0001"


def test_code_of_before_refuses_a_migrated_store(golden, later_code, monkeypatch):
    later_code()
    store.open_store(golden).close()
    monkeypatch.undo()
    with pytest.raises(StoreError, match=r"later version of treering.*revision 0002"):
        store.open_store(golden)


def test_failed_migration_leaves_the_store_as_it_was(earlier, later_code, monkeypatch):
    later_code(fault='raise RuntimeError("invented fault")')
    with pytest.raises(RuntimeError, match="invented fault"):
        store.open_store(earlier)
    assert revision_of(earlier) == "0001"
    monkeypatch.undo()
    with store.open_store(earlier) as opened:
        assert opened.head() == GOLDEN_HEAD
        assert list(opened.differences()) == []


def test_store_that_was_made_by_half_can_be_made_again(tmp_path):
    path = tmp_path / "evidence.db"
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA journal_mode=WAL")
    connection.close()
    with pytest.raises(StoreError, match="no evidence store here"):
        store.open_store(path)
    with store.create(path, review="x") as made:
        assert made.head().size == 0


def revision_of(target):
    engine = engine_for(store_url(target))
    with engine.connect() as connection:
        found = schema.revision_of(connection)
    engine.dispose()
    return found


def installed_triggers_of(target):
    engine = engine_for(store_url(target))
    with engine.connect() as connection:
        names = installed_triggers(connection)
    engine.dispose()
    return names
