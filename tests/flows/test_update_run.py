"""One `treering update` through the engine on a machine that never ran it: what is seen and what is kept."""

from __future__ import annotations

import json
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

STEPS = [
    "read intake",
    "verify",
    "append",
    "analyse failed",
    "compare with last version",
    "publish",
    "notify",
]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> Any:
    review = review_class(tmp_path_factory.mktemp("flow") / "review")
    review.drop_pair("T1", (24, 110, 33, 108))
    review.drop_pair("T2", (30, 140, 41, 138))
    review.drop("broken.json", "{")
    return review


@pytest.fixture(scope="module")
def ran(
    folder: Any,
    tmp_path_factory: pytest.TempPathFactory,
    environment_of: Callable[..., Any],
    update_and_ask: Callable[..., Any],
) -> Any:
    """Run the update once; the first start of an engine is the slow part, so all tests look at this run."""
    place = tmp_path_factory.mktemp("asked")
    environment = environment_of(place / "engine")
    return update_and_ask(place / "answer.json", environment, "update", str(folder.folder))


def test_it_lays_the_version_down_and_says_so_on_stdout(ran: Any, folder: Any) -> None:
    assert ran.out.splitlines() == [
        "version 1",
        "failed: accruing",
        str(folder.folder / "reports" / "index.html"),
    ]
    assert folder.report(1)["syntheses"][0]["k"] == 2


def test_a_returned_file_makes_status_1_and_one_remark(ran: Any) -> None:
    assert ran.answer["status"] == 1
    assert len(ran.err.splitlines()) == 1
    assert ran.err.startswith("returned: broken.json")


def test_a_first_start_prints_no_traceback_and_no_engine_chatter(ran: Any) -> None:
    for word in ("Traceback", "prefect", "Prefect", "INFO", "WARNING", "ERROR", "Task run", "Flow run"):
        assert word not in ran.out + ran.err


def test_the_run_is_named_by_its_date(ran: Any) -> None:
    ((name, state),) = ran.answer["flows"]
    days = {datetime.now(UTC).date().isoformat(), name.removeprefix("update ")}
    assert name == f"update {max(days)}"
    assert state == "Completed"


def test_each_step_is_one_task_run_under_its_own_name(ran: Any) -> None:
    assert sorted(ran.answer["tasks"]) == sorted([name, "Completed"] for name in STEPS)


def test_the_run_leaves_a_table_of_synthesis_states_and_a_link_to_the_reports(ran: Any, folder: Any) -> None:
    artifacts = {key: (kind, data) for key, kind, data in ran.answer["artifacts"]}
    kind, data = artifacts["treering-verdicts"]
    assert kind == "table"
    assert json.loads(data) == [
        {"synthesis": "failed", "title": "Failed first attempt", "verdict": "accruing"}
    ]
    _, link = artifacts["treering-report"]
    assert Path(folder.folder / "reports" / "index.html").as_uri() in link


def test_nothing_phones_out(ran: Any) -> None:
    assert ran.answer["environment"]["DO_NOT_TRACK"] == "1"
    assert ran.answer["environment"]["PREFECT_SERVER_ANALYTICS_ENABLED"] == "false"


def test_without_an_address_the_engine_is_a_temporary_one_on_this_machine(ran: Any) -> None:
    assert "PREFECT_API_URL" not in ran.answer["environment"]
    assert ran.answer["api"].startswith("http://127.0.0.1:")
