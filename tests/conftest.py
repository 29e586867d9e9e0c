"""What many tests share: a review folder with a small plan, and a private PostgreSQL server."""

from __future__ import annotations

import json
import os
import pwd
import shutil
import subprocess
import tempfile
from collections.abc import Callable, Iterator
from datetime import UTC, datetime
from itertools import count
from pathlib import Path
from typing import Any

import pytest
from hypothesis import settings
from sqlalchemy import create_engine

# One thread per process: the suite runs in several processes on two cores.
for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

# A deadline measures the machine, not the code; a run that decides about landing repeats its examples.
settings.register_profile("here", deadline=None)
settings.register_profile("deciding", deadline=None, derandomize=True)
settings.load_profile("deciding" if os.environ.get("CI") else "here")

PLAN = """
format = 1
[review]
id = "small"
title = "A small invented review"
question = "Does it work?"
intervention = "warming"
comparator = "none"
invented = true
[[people]]
id = "AA"
name = "A"
roles = ["extractor", "risk-of-bias assessor"]
own_trials = ["Own"]
[[people]]
id = "BB"
name = "B"
roles = ["extractor", "risk-of-bias assessor"]
[[people]]
id = "CC"
name = "C"
roles = ["adjudicator", "certainty rater"]
[[people]]
id = "DD"
name = "D"
roles = ["integrity contact", "information specialist", "certainty rater"]
[[outcomes]]
id = "failed"
title = "Failed first attempt"
question = "Fewer failures?"
measure = "risk-ratio"
role = "benefit"
better = "lower"
minimally_important = 0.8
comparator_risk = 0.3
[outcomes.monitoring]
effect = 0.75
effect_reason = "invented"
diversity = 0.25
diversity_reason = "invented"
"""
PANEL = """
format = 1
[[members]]
id = "chair"
name = "Chair"
[[members]]
id = "second"
name = "Second"
"""


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


class ReviewFolder:
    """A review on disk that tests drop files into and update."""

    def __init__(self, folder: Path, plan: str = PLAN, panel: str = PANEL) -> None:
        self.folder = folder
        for name in ("config", "intake"):
            (folder / name).mkdir(parents=True)
        self.write_plan(plan)
        (folder / "config" / "panel.toml").write_text(panel)

    def write_plan(self, plan: str) -> None:
        """Replace config/review.toml."""
        (self.folder / "config" / "review.toml").write_text(plan)

    def drop(self, name: str, content: Any) -> Path:
        """Put a file into intake/: text as it is, anything else as JSON."""
        path = self.folder / "intake" / name
        path.write_text(content if isinstance(content, str) else json.dumps(content))
        return path

    def drop_pair(self, trial: str, counts: tuple[int, int, int, int], **fields: Any) -> None:
        """Drop two people's equal readings of one trial with counts."""
        for person in ("AA", "BB"):
            self.drop(f"{trial}-{person}.json", self.extraction(trial, person, counts, **fields))

    @staticmethod
    def extraction(
        trial: str,
        person: str,
        counts: tuple[int, int, int, int],
        *,
        published: str = "2025-01-01",
        **fields: Any,
    ) -> dict[str, Any]:
        """Return one person's reading."""
        names = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")
        return {
            "record": "extraction",
            "trial": trial,
            "published": published,
            "extractor": person,
            "report": {"id": f"{trial}-main"},
            "results": [{"outcome": "failed", **dict(zip(names, counts, strict=True)), "locator": "table 2"}],
        } | fields

    def update(self, day: str) -> Any:
        """Run the update of a day without the engine."""
        from treering.update import RunContext, read_review, run_update

        moment = datetime.fromisoformat(f"{day}T12:00:00").replace(tzinfo=UTC)
        return run_update(RunContext(read_review(self.folder), moment, "test"))

    def report(self, version: int) -> dict[str, Any]:
        """Return report.json of a version."""
        (path,) = self.folder.glob(f"reports/*-v{version:03d}/report.json")
        report: dict[str, Any] = json.loads(path.read_text())
        return report

    def store(self) -> Any:
        """Open the evidence store."""
        from treering.update import open_evidence, read_review

        return open_evidence(read_review(self.folder))


@pytest.fixture(scope="session")
def review_class() -> type[ReviewFolder]:
    """Return the class that lays out a review folder, for fixtures that share one review."""
    return ReviewFolder


@pytest.fixture
def make_review(tmp_path: Path) -> Callable[..., ReviewFolder]:
    """Make review folders."""

    def make(plan: str = PLAN, panel: str = PANEL, name: str = "review") -> ReviewFolder:
        return ReviewFolder(tmp_path / name, plan, panel)

    return make


@pytest.fixture
def review(make_review: Callable[..., ReviewFolder]) -> ReviewFolder:
    """Return a small invented review with one monitored outcome and nothing in it."""
    return make_review()


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
