"""The weekly update as a Prefect flow: one task per step, each a few lines around `treering.update`."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from prefect import flow, task
from prefect.artifacts import create_link_artifact, create_table_artifact
from prefect.cache_policies import NO_CACHE

from treering import __version__
from treering.update import RunContext, Summary, read_review
from treering.update import weekly as steps
from treering.update.taking_in import TakenIn
from treering.update.versions import Analyses, Basis, analyse_synthesis, changes_of


@task(name="read intake", task_run_name="read intake", cache_policy=NO_CACHE)
def read_intake(context: RunContext) -> TakenIn:
    """Read and check the dropped files."""
    return steps.step_read(context)


@task(name="verify", task_run_name="verify", cache_policy=NO_CACHE)
def verify(context: RunContext, read: TakenIn) -> TakenIn:
    """Pair what two people extracted apart; a third settles."""
    return steps.step_verify(context, read)


@task(name="append", task_run_name="append", cache_policy=NO_CACHE)
def append(context: RunContext, taken: TakenIn) -> Basis | None:
    """Append to the evidence store and say what the next version is made from."""
    steps.step_append(context, taken)
    return steps.step_basis(context)


@task(name="analyse", task_run_name="analyse {outcome}", cache_policy=NO_CACHE)
def analyse(basis: Basis, outcome: str) -> dict[str, Any]:
    """Pool and monitor one synthesis."""
    return analyse_synthesis(basis, outcome)


@task(name="compare with last version", task_run_name="compare with last version", cache_policy=NO_CACHE)
def compare(basis: Basis, analyses: Analyses) -> dict[str, dict[str, Any]]:
    """Split what changed by cause."""
    return changes_of(basis, analyses)


@task(name="publish", task_run_name="publish", cache_policy=NO_CACHE)
def publish(
    context: RunContext, basis: Basis | None, analyses: Analyses, changes: dict[str, dict[str, Any]]
) -> None:
    """Lay the version down and publish its report."""
    if basis is not None:
        steps.step_lay_down(context, basis, analyses, changes)
    steps.step_publish(context)


@task(name="notify", task_run_name="notify", cache_policy=NO_CACHE)
def notify(context: RunContext) -> tuple[str, ...]:
    """Deliver the notices; what fails stays stored for the next run."""
    return steps.step_notify(context)


@flow(name="treering weekly update", flow_run_name="update {day}", log_prints=False)
def weekly_update(folder: str, day: str, as_of: datetime | None = None) -> Summary:
    """Run one weekly update of the review in `folder`.

    Parameters
    ----------
    folder : str
        The review folder.
    day : str
        Names the run; the ISO date of `as_of`.
    as_of : datetime, optional
        Time of the run, fixed here when it is not given.
    """
    moment = as_of or datetime.now(UTC)
    context = RunContext(read_review(Path(folder)), moment, __version__)
    with steps.one_writer(context) as still_held:
        taken = verify(context, read_intake(context))
        still_held()
        basis = append(context, taken)
        analyses: Analyses = {}
        changes: dict[str, dict[str, Any]] = {}
        if basis is not None:
            analyses = {outcome.id: analyse(basis, outcome.id) for outcome in basis.protocol.outcomes}
            changes = compare(basis, analyses)
        still_held()
        publish(context, basis, analyses, changes)
        failures = notify(context)
        still_held()
        summary = steps.step_close(context, taken, failures)
    _show(context, summary)
    return summary


def _show(context: RunContext, summary: Summary) -> None:
    """Leave a table of the state of each synthesis and a link to the reports with the run."""
    table = [
        {
            "synthesis": outcome.id,
            "title": outcome.title,
            "verdict": summary.verdicts.get(
                outcome.id, "no look yet" if outcome.monitoring else "not monitored"
            ),
        }
        for outcome in context.review.protocol.outcomes
    ]
    create_table_artifact(table=table, key="treering-verdicts", description=f"Update of {summary.day}")
    create_link_artifact(
        link=Path(summary.index).resolve().as_uri(), key="treering-report", link_text="Reports, all versions"
    )
