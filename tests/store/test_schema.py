"""Making, opening and migrating stores; triggers; the tables as the models see them."""

from __future__ import annotations

import shutil
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest
from alembic.autogenerate import compare_metadata
from alembic.config import Config
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import create_engine
from sqlalchemy.exc import DBAPIError

import treering
from treering import store
from treering.errors import StoreError
from treering.store import schema
from treering.store.connection import engine_for, store_url
from treering.store.models import KEY_PREFIXES, METADATA, TABLES
from treering.store.triggers import expected_triggers, installed_triggers
from treering.terms import EntryKind


def execute(target: str, *statements: str) -> None:
    """Run raw SQL on a store, as someone would who goes round treering."""
    engine = create_engine(store_url(target))
    try:
        with engine.begin() as connection:
            for statement in statements:
                connection.exec_driver_sql(statement)
    finally:
        engine.dispose()


def test_made_store_opens_again(place):
    with store.create(place, review="invented review") as made:
        head = made.head()
    with store.open_store(place) as opened:
        assert (opened.review, opened.head()) == ("invented review", head)
        assert opened.versions() == []
        assert list(opened.entries()) == []


def test_store_is_found_again_from_another_folder(tmp_path, monkeypatch, study, moment):
    monkeypatch.chdir(tmp_path)
    for address in ("evidence.db", "sqlite:///other.db"):
        with store.create(address, review="x") as made:
            (tmp_path / "elsewhere").mkdir(exist_ok=True)
            monkeypatch.chdir(tmp_path / "elsewhere")
            made._engine.dispose()
            made.append([study("T1")], known_at=moment)
            assert made.head().size == 1
        monkeypatch.chdir(tmp_path)
    assert not list((tmp_path / "elsewhere").iterdir())


def test_store_is_never_made_over_another(place):
    store.create(place, review="first").close()
    with pytest.raises(StoreError, match="There is a store already"):
        store.create(place, review="second")


def test_absent_store_is_named(place, tmp_path):
    with pytest.raises(StoreError, match=r"There is no evidence store here.*treering update"):
        store.open_store(place)
    assert not (tmp_path / "new").exists()


def test_other_database_is_left_alone(tmp_path):
    path = tmp_path / "other.db"
    with sqlite3.connect(path) as connection:
        connection.execute("CREATE TABLE accounts (id)")
    connection.close()
    for action in (store.open_store, lambda target: store.create(target, review="x")):
        with pytest.raises(StoreError, match=r"no evidence store\. Found: accounts"):
            action(path)


def test_file_that_is_no_database_is_named(tmp_path):
    path = tmp_path / "notes.txt"
    path.write_text("not a database, but long enough to look like something else " * 40)
    with pytest.raises(StoreError, match="damaged or is no database"):
        store.open_store(path)


@pytest.mark.parametrize("address", ["mysql://host/db", "postgresql+psycopg://", "what://", "://"])
def test_other_addresses_are_refused(address):
    with pytest.raises(StoreError, match="store"):
        store.open_store(address)


def test_server_that_is_not_there_is_named(tmp_path):
    with pytest.raises(StoreError, match="database server cannot be reached"):
        store.open_store(f"postgresql+psycopg://nobody@/nothing?host={tmp_path}")


def test_database_that_cannot_hold_every_character_is_refused(cluster):
    engine = create_engine(cluster.url("postgres"), isolation_level="AUTOCOMMIT")
    with engine.connect() as connection:
        connection.exec_driver_sql("CREATE DATABASE narrow ENCODING 'LATIN1' LOCALE 'C' TEMPLATE template0")
    engine.dispose()
    with pytest.raises(StoreError, match=r"every character.*LATIN1.*UTF8"):
        store.create(cluster.url("narrow"), review="x")


def test_store_from_the_future_is_refused_untouched(target):
    execute(target, "UPDATE alembic_version SET version_num = '9999'")
    with pytest.raises(StoreError, match=r"later version of treering.*9999.*Update treering"):
        store.open_store(target)


def test_tables_are_those_of_the_models(target):
    engine = engine_for(store_url(target))
    with engine.connect() as connection:
        context = MigrationContext.configure(connection, opts={"compare_type": True})
        assert compare_metadata(context, METADATA) == []
    engine.dispose()


def test_newest_revision_is_the_one_this_code_writes():
    config = Config()
    config.set_main_option("script_location", str(Path(schema.__file__).parent / "migrations"))
    config.set_main_option("path_separator", "os")
    script = ScriptDirectory.from_config(config)
    assert script.get_heads() == [schema.HEAD_REVISION]
    assert schema.known_revisions()[-1] == schema.HEAD_REVISION


def test_every_kind_has_its_own_table_and_keys():
    assert set(TABLES) == set(KEY_PREFIXES) == set(EntryKind)
    assert len({model.__tablename__ for model in TABLES.values()}) == len(EntryKind)


def test_every_table_of_a_store_is_guarded(target):
    engine = engine_for(store_url(target))
    with engine.connect() as connection:
        assert installed_triggers(connection) == expected_triggers(engine.dialect.name)
    engine.dispose()


@pytest.mark.parametrize("table", sorted(METADATA.tables))
def test_no_row_is_changed_or_removed_by_raw_sql(filled, table):
    column = METADATA.tables[table].columns.keys()[0]
    statements = [f'UPDATE "{table}" SET "{column}" = "{column}"', f'DELETE FROM "{table}"']
    if filled.startswith("postgresql"):
        statements.append(f'TRUNCATE "{table}" CASCADE')
    else:
        statements.append(f'INSERT OR REPLACE INTO "{table}" SELECT * FROM "{table}" LIMIT 1')
    for statement in statements:
        with pytest.raises(DBAPIError, match="append-only"):
            execute(filled, statement)


def test_ledger_takes_no_gap_by_raw_sql(sqlite_evidence, sqlite_target, study, moment):
    sqlite_evidence.append([study("T1")], known_at=moment)
    columns = "kind, key, true_at, known_at, by, cause, reason, replaces, hash, canonical"
    copied = f"INSERT INTO entry (seq, {columns}) SELECT 5, {columns} FROM entry".replace(" by", ' "by"')
    with pytest.raises(DBAPIError, match="append-only"):
        execute(str(sqlite_target), copied)


def test_typed_row_needs_its_entry(target):
    with store.open_store(target), pytest.raises(DBAPIError, match=r"(?i)foreign key"):
        execute_with_keys(target, "INSERT INTO withdrawal (entry, reason) VALUES (7, 'x')")


def execute_with_keys(target: str, statement: str) -> None:
    engine = engine_for(store_url(target))
    try:
        with engine.begin() as connection:
            connection.exec_driver_sql(statement)
    finally:
        engine.dispose()


def test_commits_reach_the_disk_and_readers_are_not_blocked(sqlite_target):
    engine = engine_for(store_url(sqlite_target))
    with engine.connect() as connection:
        modes = [
            connection.exec_driver_sql(f"PRAGMA {name}").scalar() for name in ("journal_mode", "synchronous")
        ]
    engine.dispose()
    assert modes == ["wal", 2]


def test_migrations_travel_with_an_installed_package(tmp_path):
    """A copy of the package in another folder, as a wheel unpacks it, makes and opens a store."""
    shutil.copytree(Path(treering.__file__).parent, tmp_path / "site" / "treering")
    code = (
        "import sys; sys.path.insert(0, sys.argv[1]); from treering import store; "
        "assert store.__file__.startswith(sys.argv[1]); "
        "store.create(sys.argv[2], review='x').close(); print(store.open_store(sys.argv[2]).head().size)"
    )
    command = [sys.executable, "-c", code, str(tmp_path / "site"), str(tmp_path / "e.db")]
    done = subprocess.run(command, capture_output=True, text=True, check=True, cwd=tmp_path)
    assert done.stdout == "0\n"
