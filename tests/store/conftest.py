"""Stores to test on: SQLite in a temporary folder, and a private PostgreSQL cluster.

The cluster is started once per session in a folder of its own and listens on a socket there only. Tests on
PostgreSQL are skipped only where its programs are not installed.
"""

from __future__ import annotations

import importlib.util
import shutil
import sqlite3
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from sqlalchemy import create_engine

from treering import store
from treering.records import NewEntry
from treering.store import EvidenceStore
from treering.store.models import KEY_PREFIXES, METADATA, TABLES
from treering.store.projection import BODY_FIELDS
from treering.store.schema import HEAD_REVISION
from treering.terms import EntryKind

REVIEW = "invented review"
MOMENT = "2026-05-04T06:00:00Z"


def empty(url: str) -> None:
    """Remove all entries from a store on PostgreSQL, as only the owner of the server can."""
    engine = create_engine(url)
    with engine.begin() as connection:
        connection.exec_driver_sql("SET LOCAL session_replication_role = replica")
        for table in set(METADATA.tables) - {"store"}:
            connection.exec_driver_sql(f'DELETE FROM "{table}"')
        connection.exec_driver_sql(f"UPDATE alembic_version SET version_num = '{HEAD_REVISION}'")
    engine.dispose()


@pytest.fixture(scope="session")
def empty_sqlite(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A file with an empty store; copied, since making one takes longer than most tests."""
    path = tmp_path_factory.mktemp("empty") / "evidence.db"
    store.create(path, review=REVIEW).close()
    return path


@pytest.fixture(scope="session")
def shared_postgres(cluster: Any) -> str:
    """A store on PostgreSQL that is emptied before each test; a new database would take far longer."""
    url = cluster.fresh()
    store.create(url, review=REVIEW).close()
    return url


@pytest.fixture(params=["sqlite", "postgresql"])
def place(request: pytest.FixtureRequest, tmp_path: Path) -> str:
    """Where no store is yet: on each of the two databases in turn."""
    if request.param == "sqlite":
        return str(tmp_path / "new" / "evidence.db")
    return str(request.getfixturevalue("postgres_url"))


@pytest.fixture
def sqlite_target(tmp_path: Path, empty_sqlite: Path) -> Path:
    """Where an empty store lies on SQLite."""
    path = tmp_path / "store" / "evidence.db"
    path.parent.mkdir()
    shutil.copy(empty_sqlite, path)
    return path


@pytest.fixture(params=["sqlite", "postgresql"])
def target(request: pytest.FixtureRequest) -> str:
    """Where an empty store lies: on each of the two databases in turn."""
    if request.param == "sqlite":
        return str(request.getfixturevalue("sqlite_target"))
    url: str = request.getfixturevalue("shared_postgres")
    empty(url)
    return url


@pytest.fixture
def evidence(target: str) -> Iterator[EvidenceStore]:
    """An empty store on each of the two databases in turn."""
    made = store.open_store(target)
    yield made
    made.close()


@pytest.fixture
def sqlite_evidence(sqlite_target: Path) -> Iterator[EvidenceStore]:
    """An empty store on SQLite."""
    made = store.open_store(sqlite_target)
    yield made
    made.close()


@pytest.fixture
def moment() -> str:
    """When the runs of these tests begin."""
    return MOMENT


@pytest.fixture
def study() -> Callable[..., NewEntry]:
    """A study entry of an invented trial."""

    def make(trial: str = "T1", **changes: object) -> NewEntry:
        body = {"trial": trial, "title": f"Invented trial {trial}", "randomised": 120, "year": 2021}
        entry = {"true_at": "2021-03-01", "by": "AB", "replaces": None, "cause": None, "reason": None}
        entry |= {name: changes.pop(name) for name in list(changes) if name in entry}
        return NewEntry(EntryKind.STUDY, f"study/{trial}", body | changes, **entry)  # type: ignore[arg-type]

    return make


@pytest.fixture
def version() -> Callable[..., NewEntry]:
    """A version entry that leaves its head to the store."""

    def make(number: int, **body: object) -> NewEntry:
        fields = {"version": number, "date": "2026-05-04", "causes": ["new trial"]} | body
        return NewEntry(EntryKind.VERSION, f"version/{number}", fields, "2026-05-04")

    return make


@pytest.fixture(scope="module", params=["sqlite", "postgresql"])
def filled(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> str:
    """A store with an entry of every kind and a stored tree node, for tests that leave it as it is."""
    if request.param == "sqlite":
        place = str(tmp_path_factory.mktemp("filled") / "evidence.db")
    else:
        place = request.getfixturevalue("cluster").fresh()
    with store.create(place, review=REVIEW) as made:
        made.append(every_kind(), known_at=MOMENT)
        studies = (
            NewEntry(EntryKind.STUDY, f"study/F{n}", {"trial": f"F{n}"}, "2020-01-01") for n in range(256)
        )
        made.append(studies, known_at=MOMENT)
    return place


def every_kind() -> list[NewEntry]:
    """Return one entry of each kind; the withdrawal withdraws the defect before it."""
    required = {"version": 1, "number": 1, "event": "boundary crossed", "reason": "x"}
    entries = []
    for kind in sorted(EntryKind, key=lambda kind: kind == EntryKind.WITHDRAWAL):
        prefix = KEY_PREFIXES[kind] or "defect/"
        body = dict.fromkeys(name for name in BODY_FIELDS[kind] if name in IDENTITIES)
        body = {name: required.get(name, "x") for name in body}
        key = prefix if kind == EntryKind.PROTOCOL else f"{prefix}1"
        replaces = None
        if kind == EntryKind.WITHDRAWAL:
            replaces = next(n for n, entry in enumerate(entries) if entry.kind == EntryKind.DEFECT)
        entries.append(NewEntry(kind, key, body, "2026-05-04", replaces=replaces))
    return entries


IDENTITIES = {
    column.name
    for model in TABLES.values()
    for column in METADATA.tables[str(model.__tablename__)].columns
    if not column.nullable
} - {"entry", "entries", "root"}


@pytest.fixture
def lay_golden() -> Callable[[EvidenceStore], None]:
    """Lay down the review of the golden store."""
    path = Path(__file__).parent / "scripts" / "lay_golden.py"
    specification = importlib.util.spec_from_file_location("lay_golden", path)
    assert specification is not None
    assert specification.loader is not None
    script = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(script)
    lay_down: Callable[[EvidenceStore], None] = script.lay_down
    return lay_down


@pytest.fixture
def golden(tmp_path: Path) -> Path:
    """The store that the code of revision 0001 made."""
    path = tmp_path / "golden.db"
    text = (Path(__file__).parents[1] / "assets" / "stores" / "revision-0001.sql").read_text(encoding="utf-8")
    connection = sqlite3.connect(path, isolation_level=None)
    connection.executescript(text)
    connection.close()
    return path
