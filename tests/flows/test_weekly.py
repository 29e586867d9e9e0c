"""The tasks are a few lines around the steps: called bare, without engine, they do one update."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Any

import pytest

from treering import __version__
from treering.update import RunContext, read_review

MOMENT = datetime(2026, 1, 5, 12, tzinfo=UTC)


def context_of(review: Any) -> RunContext:
    return RunContext(read_review(review.folder), MOMENT, __version__)


def test_the_tasks_in_their_order_lay_down_and_publish_a_version(weekly: Any, review: Any) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    context = context_of(review)
    read = weekly.read_intake.fn(context)
    assert len(read.checked.accepted) == 2
    taken = weekly.verify.fn(context, read)
    basis = weekly.append.fn(context, taken)
    analyses = {"failed": weekly.analyse.fn(basis, "failed")}
    changes = weekly.compare.fn(basis, analyses)
    weekly.publish.fn(context, basis, analyses, changes)
    assert weekly.notify.fn(context) == ()
    assert review.report(1)["syntheses"][0]["k"] == 1


def test_in_a_quiet_week_there_is_nothing_to_analyse(weekly: Any, review: Any) -> None:
    context = context_of(review)
    taken = weekly.verify.fn(context, weekly.read_intake.fn(context))
    assert weekly.append.fn(context, taken) is None
    weekly.publish.fn(context, None, {}, {})
    assert not list(review.folder.glob("reports/*-v*"))


def test_every_step_is_a_task_and_nothing_is_cached(weekly: Any) -> None:
    from prefect.cache_policies import NO_CACHE

    tasks = [weekly.read_intake, weekly.verify, weekly.append, weekly.analyse, weekly.compare, weekly.publish]
    for task in [*tasks, weekly.notify]:
        assert task.cache_policy == NO_CACHE, "a step reads the store: a cached answer would be an old one"


@pytest.mark.parametrize(
    ("day", "hour", "cron"),
    [("Thursday", 6, "0 6 * * 4"), ("sunday", 0, "0 0 * * 0"), ("Monday", 23, "0 23 * * 1")],
)
@pytest.mark.usefixtures("weekly")
def test_a_weekly_time_is_one_cron_line(day: str, hour: int, cron: str) -> None:
    from treering_flows.schedule import cron_of

    assert cron_of(day, hour) == cron


@pytest.mark.usefixtures("weekly")
def test_the_schedule_allows_one_run_at_a_time(review: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    import treering_flows.schedule as schedule

    served: list[Any] = []
    monkeypatch.setattr(schedule, "serve", lambda deployment, **rest: served.append((deployment, rest)))
    schedule.serve_weekly(review.folder, day="Friday", hour=5)
    ((deployment, rest),) = served
    assert rest == {"pause_on_shutdown": False}
    assert deployment.parameters == {"folder": str(review.folder)}
    assert [entry.schedule.cron for entry in deployment.schedules] == ["0 5 * * 5"]
    assert deployment.concurrency_limit == 1
    assert deployment.concurrency_options.collision_strategy.value == "CANCEL_NEW"
