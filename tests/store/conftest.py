"""Stores to test on: SQLite in a temporary folder, and a private PostgreSQL cluster.

The cluster is started once per session in a folder of its own and listens on a socket there only. Tests on
PostgreSQL are skipped only where its programs are not installed.
"""

from __future__ import annotations

import os
import pwd
import shutil
import subprocess
import tempfile
from collections.abc import Callable, Iterator
from itertools import count
from pathlib import Path

import pytest
from sqlalchemy import create_engine

from treering import store
from treering.records import NewEntry
from treering.store import EvidenceStore
from treering.terms import EntryKind

MOMENT = "2026-05-04T06:00:00Z"


def _programs() -> Path | None:
    """Return the folder of the newest PostgreSQL server programs."""
    found = shutil.which("initdb")
    places = [Path(found).parent] if found else []
    places += sorted(Path("/usr/lib/postgresql").glob("*/bin"), key=lambda path: -int(path.parent.name))
    return next((place for place in places if (place / "pg_ctl").exists()), None)


class Cluster:
    """A private PostgreSQL server; refuses to run as root, so root hands it to the user postgres."""

    def __init__(self, programs: Path) -> None:
        self.programs = programs
        self.folder = Path(tempfile.mkdtemp(prefix="trpg", dir="/tmp"))
        self._as_user: list[str] = []
        self.user = pwd.getpwuid(os.getuid()).pw_name
        if os.getuid() == 0:
            self.user = "postgres"
            self._as_user = ["runuser", "-u", self.user, "--"]
            shutil.chown(self.folder, self.user)
        self._run("initdb", "-D", self._data, "-U", "treering", "-A", "trust", "-E", "UTF8", "--no-sync")
        self._names = count()

    @property
    def _data(self) -> str:
        return str(self.folder / "data")

    def _run(self, program: str, *arguments: str) -> None:
        command = [*self._as_user, str(self.programs / program), *arguments]
        log = self.folder.with_suffix(".out")
        with log.open("ab") as out:
            subprocess.run(command, check=True, stdout=out, stderr=out, cwd="/tmp")

    def start(self) -> None:
        options = f"-c listen_addresses='' -c unix_socket_directories={self.folder} -c fsync=off"
        self._run("pg_ctl", "-D", self._data, "-w", "-l", str(self.folder / "log"), "-o", options, "start")

    def stop(self) -> None:
        self._run("pg_ctl", "-D", self._data, "-w", "-m", "immediate", "stop")

    def remove(self) -> None:
        shutil.rmtree(self.folder)
        self.folder.with_suffix(".out").unlink()

    def url(self, database: str) -> str:
        return f"postgresql+psycopg://treering@/{database}?host={self.folder}"

    def fresh(self) -> str:
        """Return the URL of a new empty database."""
        name = f"review{next(self._names)}"
        engine = create_engine(self.url("postgres"), isolation_level="AUTOCOMMIT")
        with engine.connect() as connection:
            connection.exec_driver_sql(f"CREATE DATABASE {name}")
        engine.dispose()
        return self.url(name)


@pytest.fixture(scope="session")
def cluster() -> Iterator[Cluster]:
    programs = _programs()
    if programs is None:
        pytest.skip("PostgreSQL is not installed here")
    running = Cluster(programs)
    running.start()
    yield running
    running.stop()
    running.remove()


@pytest.fixture
def postgres_url(cluster: Cluster) -> str:
    return cluster.fresh()


@pytest.fixture(params=["sqlite", "postgresql"])
def target(request: pytest.FixtureRequest, tmp_path: Path) -> str:
    """Where a store may be made: on each of the two databases in turn."""
    if request.param == "sqlite":
        return str(tmp_path / "store" / "evidence.db")
    return str(request.getfixturevalue("postgres_url"))


@pytest.fixture
def evidence(target: str) -> Iterator[EvidenceStore]:
    """An empty store on each of the two databases in turn."""
    made = store.create(target, review="invented review")
    yield made
    made.close()


@pytest.fixture
def sqlite_evidence(tmp_path: Path) -> Iterator[EvidenceStore]:
    """An empty store on SQLite."""
    made = store.create(tmp_path / "store" / "evidence.db", review="invented review")
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
