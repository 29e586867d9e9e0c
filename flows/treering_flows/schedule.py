"""The weekly schedule: one deployment, one run at a time, nothing made up for missed weeks."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import cast

from prefect import flow, get_run_logger, serve
from prefect.client.schemas.objects import ConcurrencyLimitConfig, ConcurrencyLimitStrategy
from prefect.deployments.runner import RunnerDeployment
from prefect.schedules import Cron

from treering.errors import ProtocolError
from treering_flows.weekly import weekly_update

DAYS = ("Sunday", "Monday", "Tuesday", "Wednesday", "Thursday", "Friday", "Saturday")


def cron_of(day: str, hour: int) -> str:
    """Return the cron line of a weekly time.

    Raises
    ------
    ProtocolError
        When the day or the hour is not one.
    """
    if day.capitalize() not in DAYS or not 0 <= hour <= 23:
        raise ProtocolError(
            "the weekly time is not one.",
            found=f"{day} {hour}",
            expected=f"one of {', '.join(DAYS)} and an hour from 0 to 23",
        )
    return f"0 {hour} * * {DAYS.index(day.capitalize())}"


@flow(name="treering scheduled update")
def scheduled_update(folder: str) -> None:
    """Run one update at the real time; a run that starts late does not fake its date."""
    now = datetime.now(UTC)
    summary = weekly_update(folder, now.date().isoformat(), now)
    faults = [fault for item in summary.returned for fault in item["faults"]]
    for text in (*(f"returned: {fault}" for fault in faults), *summary.undelivered):
        get_run_logger().warning(text)


def serve_weekly(folder: Path, *, day: str, hour: int) -> None:
    """Serve the weekly deployment until the process is stopped.

    A run that would overlap another is cancelled; the evidence store has its own lock besides.
    """
    # Outside an event loop the engine's call answers at once; its type also covers the awaited form.
    deployment = cast(
        RunnerDeployment,
        scheduled_update.to_deployment(
            name=f"weekly-{folder.name}",
            parameters={"folder": str(folder)},
            schedule=Cron(cron_of(day, hour), timezone="UTC"),
            concurrency_limit=ConcurrencyLimitConfig(
                limit=1, collision_strategy=ConcurrencyLimitStrategy.CANCEL_NEW
            ),
        ),
    )
    serve(deployment, pause_on_shutdown=False)
