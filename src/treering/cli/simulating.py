"""The command that simulates this review's own monitoring plan."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from treering.cli.output import EXIT_DONE, EXIT_REFUSED, remark, say, say_json, say_table
from treering.terms import CAUTION


def simulate(
    folder: Path = Path(),
    /,
    *,
    outcome: str | None = None,
    reviews: int = 20_000,
    seed: int = 1,
    calibrate: bool = False,
    json: bool = False,
) -> int:
    """Simulate this review's own monitoring plan: how often it errs.

    Parameters
    ----------
    folder : Path
        The review folder.
    outcome : str, optional
        A monitored outcome; all of them when left out.
    reviews : int
        Simulated reviews per true effect and between-trial variance.
    seed : int
        Seed; the same seed gives the same figures on any number of cores.
    calibrate : bool
        Propose the alpha that holds the false-alarm rate over the protocol's tau2_range.
    json : bool
        Print JSON.
    """
    from treering.errors import ProtocolError
    from treering.update import read_review
    from treering.update.simulating import keep, simulate_plan

    review = read_review(folder)
    wanted = [o for o in review.protocol.outcomes if o.monitoring and outcome in (None, o.id)]
    if not wanted:
        raise ProtocolError(
            "there is no monitored outcome of that name.",
            found=outcome,
            expected=", ".join(o.id for o in review.protocol.outcomes if o.monitoring),
        )
    state, versions = _evidence(review)
    found = []
    with _progress() as progress:
        for one in wanted:
            found.append(
                simulate_plan(
                    one,
                    state,
                    versions,
                    reviews=reviews,
                    seed=seed,
                    with_calibration=calibrate,
                    progress=progress(one.id),
                )
            )
    keep(review, found, _now())
    if json:
        say_json([item.to_dict() for item in found])
    else:
        for item in found:
            _tell(item)
        remark(CAUTION)
    return EXIT_REFUSED if any(item.result.exceeds for item in found) else EXIT_DONE


def _evidence(review: Any) -> tuple[Any, int]:
    from treering.update import open_evidence

    with open_evidence(review) as store:
        return store.state(), len(store.versions())


def _now() -> str:
    from datetime import UTC, datetime

    return datetime.now(UTC).replace(microsecond=0).isoformat()


def _progress() -> Any:
    """Return a context whose value makes a progress callback per outcome; silent when piped."""
    from contextlib import contextmanager

    from rich.console import Console
    from rich.progress import Progress

    @contextmanager
    def shown() -> Any:
        console = Console(stderr=True)
        with Progress(console=console, transient=True, disable=not console.is_terminal) as bar:

            def of(name: str) -> Any:
                task = bar.add_task(f"simulating {name}", total=None)
                return lambda done, total: bar.update(task, completed=done, total=total)

            yield of

    return shown()


def _tell(item: Any) -> None:
    body = item.to_dict()
    say(f"{item.outcome}: {body['reviews']} reviews per row, seed {body['seed']}")
    say_table(
        body["rows"],
        {
            "rule": "rule",
            "effect": "true effect",
            "tau2": "tau2",
            "alarm": "crossed",
            "alarm_error": "error",
            "right_way": "right way",
            "information": "information at crossing",
            "lost": "later lost",
            "bias": "bias at crossing",
        },
    )
    alpha = item.result.plan.alpha
    if item.result.exceeds:
        worst = item.result.worst
        rate = f"{worst.alarm:.4f} (error {worst.alarm_error:.4f}) at tau2 {worst.tau2:g}"
        remark(
            f"{item.outcome}: the plan's false-alarm rate is {rate}, above its alpha of {alpha:g}. "
            "Run with --calibrate for an alpha that holds, and amend the protocol."
        )
    if item.calibration is not None:
        say(f"{item.outcome}: alpha that holds {alpha:g}: {item.calibration.alpha:.4g}")
