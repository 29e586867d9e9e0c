"""Defaults of the engine: private, patient and quiet, and a user's own setting wins."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from treering_flows.engine import prepare_engine


@pytest.fixture
def environment(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> dict[str, str]:
    """Stand in for the process's environment."""
    bare = {"HOME": str(tmp_path)}
    monkeypatch.setattr(os, "environ", bare)
    return bare


def test_nothing_phones_out_and_the_log_is_silent(environment: dict[str, str]) -> None:
    prepare_engine()
    assert environment["DO_NOT_TRACK"] == "1"
    assert environment["PREFECT_SERVER_ANALYTICS_ENABLED"] == "false"
    assert environment["PREFECT_LOGGING_LEVEL"] == "CRITICAL"
    assert environment["PREFECT_SERVER_LOGGING_LEVEL"] == "CRITICAL"


def test_a_first_start_may_take_longer_than_the_engine_would_wait(environment: dict[str, str]) -> None:
    prepare_engine()
    assert int(environment["PREFECT_SERVER_EPHEMERAL_STARTUP_TIMEOUT_SECONDS"]) > 60


def test_verbose_leaves_the_log_alone_and_still_phones_nobody(environment: dict[str, str]) -> None:
    prepare_engine(verbose=True)
    assert "PREFECT_LOGGING_LEVEL" not in environment
    assert environment["DO_NOT_TRACK"] == "1"


def test_an_unwatched_schedule_keeps_warnings(environment: dict[str, str]) -> None:
    prepare_engine(unwatched=True)
    assert environment["PREFECT_LOGGING_LEVEL"] == "WARNING"


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("DO_NOT_TRACK", "0"),
        ("PREFECT_LOGGING_LEVEL", "DEBUG"),
        ("PREFECT_SERVER_EPHEMERAL_STARTUP_TIMEOUT_SECONDS", "7"),
        ("PREFECT_HOME", "/elsewhere"),
        ("PREFECT_API_URL", "http://127.0.0.1:4200/api"),
    ],
)
def test_a_setting_of_the_user_wins(environment: dict[str, str], name: str, value: str) -> None:
    environment[name] = value
    prepare_engine()
    assert environment[name] == value


def test_a_home_that_cannot_be_written_gets_a_place_for_the_engine(
    environment: dict[str, str], monkeypatch: pytest.MonkeyPatch
) -> None:
    prepare_engine()
    assert "PREFECT_HOME" not in environment
    monkeypatch.setattr(Path, "home", lambda: Path("/nonexistent"))
    prepare_engine()
    assert Path(environment["PREFECT_HOME"]).is_dir()
    Path(environment["PREFECT_HOME"]).rmdir()
