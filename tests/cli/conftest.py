"""Commands run two ways: in this process for speed, as a real process where that is what matters."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import pytest

from treering.cli import main

TREERING = Path(sys.executable).with_name("treering")


class Ran(NamedTuple):
    """What one command left: exit status, data, remarks."""

    status: int
    out: str
    err: str


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str]) -> Callable[..., Ran]:
    """Run a command in this process."""

    def call(*arguments: object) -> Ran:
        capsys.readouterr()
        with pytest.raises(SystemExit) as stopped:
            main([str(argument) for argument in arguments])
        out, err = capsys.readouterr()
        return Ran(int(str(stopped.value.code)), out, err)

    return call


@pytest.fixture
def process() -> Callable[..., Ran]:
    """Run a command as people do, in a process of its own with pipes for stdout and stderr."""

    def call(*arguments: object, **environment: str) -> Ran:
        done = subprocess.run(
            [TREERING, *map(str, arguments)],
            capture_output=True,
            text=True,
            timeout=300,
            env={**os.environ, **environment},
            check=False,
        )
        return Ran(done.returncode, done.stdout, done.stderr)

    return call


@pytest.fixture(scope="module")
def past(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> Any:
    """Return a review with a base version, a quiet week and a version whose large trial crosses."""
    review = review_class(tmp_path_factory.mktemp("past") / "review")
    review.drop_pair("T1", (24, 110, 33, 108))
    review.drop_pair("T2", (30, 140, 41, 138))
    review.update("2026-01-05")
    review.update("2026-01-12")
    review.drop_pair("Large", (150, 800, 230, 800), published="2026-01-10")
    review.update("2026-01-19")
    return review


@pytest.fixture(scope="session")
def digests() -> Callable[[Path], dict[str, str]]:
    """Return a function from a folder to the digest of every file and the name of every folder in it."""

    def of(folder: Path) -> dict[str, str]:
        return {
            str(path.relative_to(folder)): (
                hashlib.sha256(path.read_bytes()).hexdigest() if path.is_file() else "folder"
            )
            for path in sorted(folder.rglob("*"))
        }

    return of
