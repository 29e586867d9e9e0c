"""An engine home of its own, so that no test touches the engine of the person who runs it."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import pytest

SCRIPTS = Path(__file__).parent / "scripts"


class Asked(NamedTuple):
    """What a command printed, and what the engine's API says of it."""

    out: str
    err: str
    answer: dict[str, Any]


def bare_environment(home: Path, **more: str) -> dict[str, str]:
    """Return this environment without any setting of the engine, and with an engine home of its own."""
    kept = {n: v for n, v in os.environ.items() if not n.startswith("PREFECT") and n != "DO_NOT_TRACK"}
    return {**kept, "PREFECT_HOME": str(home), **more}


@pytest.fixture(scope="session")
def environment_of() -> Callable[..., dict[str, str]]:
    """Return the function that makes an environment for a command."""
    return bare_environment


@pytest.fixture(scope="session")
def update_and_ask() -> Callable[..., Asked]:
    """Run one command in a process of its own, then ask the engine's API in the same process."""

    def call(target: Path, environment: dict[str, str], *command: str) -> Asked:
        done = subprocess.run(
            [sys.executable, SCRIPTS / "update_and_ask.py", target, *command],
            capture_output=True,
            text=True,
            timeout=300,
            env=environment,
            check=False,
        )
        assert target.exists(), done.stderr
        return Asked(done.stdout, done.stderr, json.loads(target.read_text()))

    return call


@pytest.fixture(scope="session")
def engine_home(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a new PREFECT_HOME."""
    return tmp_path_factory.mktemp("engine")


@pytest.fixture(scope="session")
def weekly(engine_home: Path) -> Any:
    """Import the flow's module with the engine's files kept out of the home of the person."""
    kept = dict(os.environ)
    os.environ.update(bare_environment(engine_home))
    try:
        from treering_flows.engine import prepare_engine

        prepare_engine()
        import treering_flows.weekly as module

        yield module
    finally:
        os.environ.clear()
        os.environ.update(kept)
