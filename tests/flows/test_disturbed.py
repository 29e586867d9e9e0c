"""The engine under stress: a server of its own, a kill in the middle of a flow, refusals, two at a time."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
import requests

pytestmark = pytest.mark.slow

SCRIPTS = Path(__file__).parent / "scripts"
TREERING = Path(sys.executable).with_name("treering")
PREFECT = Path(sys.executable).with_name("prefect")


def wait_for(what: Callable[[], bool], seconds: float = 180) -> None:
    end = time.monotonic() + seconds
    while not what():
        assert time.monotonic() < end, "it did not come"
        time.sleep(0.2)


def update(folder: Path, environment: dict[str, str]) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [TREERING, "update", folder],
        capture_output=True,
        text=True,
        timeout=300,
        env=environment,
        check=False,
    )


@pytest.fixture(scope="module")
def home(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return one engine home for this module: only its first start is slow."""
    return tmp_path_factory.mktemp("engine")


@pytest.fixture
def server(tmp_path: Path, environment_of: Callable[..., dict[str, str]]) -> Iterator[str]:
    """Start a server of the engine on a free loopback port, as a team would keep one."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    environment = environment_of(
        tmp_path / "server", DO_NOT_TRACK="1", PREFECT_SERVER_ANALYTICS_ENABLED="false"
    )
    with subprocess.Popen(
        [PREFECT, "server", "start", "--host", "127.0.0.1", "--port", str(port)],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        env=environment,
        start_new_session=True,
    ) as child:
        url = f"http://127.0.0.1:{port}/api"

        def healthy() -> bool:
            assert child.poll() is None, "the server ended"
            try:
                return requests.get(f"{url}/health", timeout=2).ok
            except requests.RequestException:
                return False

        try:
            wait_for(healthy)
            yield url
        finally:
            os.killpg(child.pid, signal.SIGKILL)


def test_a_server_named_by_its_address_gets_the_run(
    server: str,
    review: Any,
    tmp_path: Path,
    environment_of: Callable[..., Any],
    update_and_ask: Callable[..., Any],
) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    environment = environment_of(tmp_path / "client", PREFECT_API_URL=server)
    ran = update_and_ask(tmp_path / "answer.json", environment, "update", str(review.folder))
    assert (ran.answer["status"], ran.err) == (0, "")
    assert ran.answer["api"].rstrip("/") == server
    asked = requests.post(f"{server}/flow_runs/filter", json={}, timeout=10).json()
    assert [run["name"] for run in asked] == [name for name, _ in ran.answer["flows"]]
    assert asked[0]["name"].startswith("update ")
    assert asked[0]["state_type"] == "COMPLETED"


def test_a_killed_update_run_again_completes_with_nothing_lost_or_doubled(
    review: Any,
    make_review: Callable[..., Any],
    home: Path,
    tmp_path: Path,
    environment_of: Callable[..., Any],
) -> None:
    undisturbed = make_review(name="undisturbed")
    for one in (review, undisturbed):
        one.drop_pair("T1", (24, 110, 33, 108))
        one.drop_pair("T2", (30, 140, 41, 138))
    undisturbed.update("2026-01-05")
    sign = tmp_path / "stands-at-publish"
    with subprocess.Popen(
        [sys.executable, SCRIPTS / "hold_at_publish.py", review.folder, sign],
        env=environment_of(home),
        start_new_session=True,
    ) as child:
        try:
            wait_for(lambda: sign.exists() or child.poll() is not None)
        finally:
            os.killpg(child.pid, signal.SIGKILL)  # the engine's temporary server dies with it
    assert sign.exists(), "the update ended before it could be killed"
    assert child.returncode == -signal.SIGKILL
    assert not list(review.folder.glob("reports/*-v*"))

    again = update(review.folder, environment_of(home))
    assert (again.returncode, again.stderr) == (0, "")
    (found,), (expected,) = (one.report(1)["syntheses"] for one in (review, undisturbed))
    for part in ("k", "participants", "pooled", "common"):
        assert found[part] == expected[part], part
    assert len(found["monitoring"]["looks"]) == 1
    with review.store() as store, undisturbed.store() as calm:
        assert len(store.versions()) == 1
        assert sorted(e.key for e in store.entries() if e.kind.value not in ("run", "receipt")) == sorted(
            e.key for e in calm.entries() if e.kind.value not in ("run", "receipt")
        )
    assert len(list(review.folder.glob("intake/filed/*"))) == 4


def test_a_refused_update_says_one_sentence_and_no_traceback(
    review: Any, home: Path, environment_of: Callable[..., Any]
) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    review.update("2026-01-05")
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan.replace("diversity = 0.25", "diversity = 0.4"))
    ran = update(review.folder, environment_of(home))
    assert (ran.returncode, ran.stdout) == (1, "")
    assert len(ran.stderr.splitlines()) == 1
    assert "amendment" in ran.stderr


def test_an_update_beside_another_is_refused_and_leaves_it_alone(
    review: Any, home: Path, environment_of: Callable[..., Any]
) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    review.update("2026-01-05")
    with review.store() as store, store.exclusive():
        ran = update(review.folder, environment_of(home))
    assert (ran.returncode, ran.stdout) == (1, "")
    assert ran.stderr.startswith("Another update of this review is running.")
    assert len(ran.stderr.splitlines()) == 1
