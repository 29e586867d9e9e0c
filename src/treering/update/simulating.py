"""Simulate this review's own monitoring plan: its trial sizes, its looks, its comparator risk."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from treering.errors import ProtocolError
from treering.monitoring import (
    BinaryTrials,
    Calibration,
    MonitoringPlan,
    SimulationDesign,
    SimulationResult,
    calibrate,
    continued_design,
    simulate,
)
from treering.protocol import Outcome
from treering.records import NewEntry
from treering.store import State
from treering.synthesis import plain, plan_of
from treering.terms import EntryKind, Measure
from treering.update.context import Review, open_evidence
from treering.update.versions import analyses_of, looks_of

Progress = Callable[[int, int], None]
DRAWN = frozenset({Measure.RISK_RATIO, Measure.ODDS_RATIO})


@dataclass(frozen=True)
class PlanSimulation:
    """What simulating one plan found.

    Parameters
    ----------
    outcome : str
        The outcome.
    result : SimulationResult
        Every rule at every true effect and tau2.
    calibration : Calibration or None
        The alpha that holds the rate, when it was asked for.
    """

    outcome: str
    result: SimulationResult
    calibration: Calibration | None

    def to_dict(self) -> dict[str, Any]:
        """Return it as plain values."""
        return {
            "outcome": self.outcome,
            "plan_digest": self.result.plan.digest(),
            "exceeds": self.result.exceeds,
            **self.result.to_dict(),
            "calibration": None if self.calibration is None else self.calibration.to_dict(),
        }


def design_of(outcome: Outcome, plan: MonitoringPlan, state: State, versions: int) -> SimulationDesign:
    """Return the trials and looks to simulate: those seen so far, then more of their median size.

    Parameters
    ----------
    outcome : Outcome
        The outcome.
    plan : MonitoringPlan
        Its plan.
    state : State
        Everything in the store.
    versions : int
        Number of versions so far.

    Returns
    -------
    SimulationDesign

    Raises
    ------
    ProtocolError
        When no trial with a usable result tells how large trials are.
    """
    body = analyses_of(state, versions).get(outcome.id) if versions else None
    rows = [row for row in (body or {}).get("trials", ()) if row["in_main"]]
    if not rows:
        raise ProtocolError(
            f"outcome {outcome.id} has no trial yet that tells how large trials are.",
            next_step="Run `treering update` with the first verified trials, then simulate.",
        )
    looks = _looks(rows, state, outcome.id)
    tau2 = outcome.monitoring.tau2_range if outcome.monitoring else (0.0,)
    design = SimulationDesign(
        information=tuple(1 / row["standard_error"] ** 2 for row in rows),
        looks=looks,
        tau2=tau2,
        counts=_counts(outcome, rows),
    )
    return continued_design(design, plan.required_information)


def _looks(rows: Sequence[dict[str, Any]], state: State, synthesis: str) -> tuple[int, ...]:
    """Return how many of today's trials were in at each look, as it happened."""
    position = {row["trial"]: number for number, row in enumerate(rows)}
    sizes = {sum(trial in position for trial in look.trials) for look in looks_of(state, synthesis)}
    return tuple(sorted(sizes - {0} | {len(rows)}))


def _counts(outcome: Outcome, rows: Sequence[dict[str, Any]]) -> BinaryTrials | None:
    arms = [(row["intervention_total"], row["comparator_total"]) for row in rows]
    if outcome.measure not in DRAWN or outcome.comparator_risk is None or any(None in pair for pair in arms):
        return None
    return BinaryTrials(
        intervention_total=tuple(pair[0] for pair in arms),
        comparator_total=tuple(pair[1] for pair in arms),
        comparator_risk=outcome.comparator_risk,
        measure=outcome.measure,
    )


def simulate_plan(
    outcome: Outcome,
    state: State,
    versions: int,
    *,
    reviews: int,
    seed: int,
    with_calibration: bool,
    progress: Progress | None = None,
) -> PlanSimulation:
    """Simulate the plan of one outcome, and propose the alpha that holds its rate when asked.

    Parameters
    ----------
    outcome : Outcome
        A monitored outcome.
    state : State
        Everything in the store.
    versions : int
        Number of versions so far.
    reviews, seed : int
        Reviews per scenario; seed of all streams.
    with_calibration : bool
        Whether to propose an alpha.
    progress : callable, optional
        Called with chunks done and chunks in all.

    Returns
    -------
    PlanSimulation

    Raises
    ------
    ProtocolError
        When the outcome is not monitored, or no trial is there yet.
    """
    plan = plan_of(outcome)
    if plan is None:
        raise ProtocolError(f"outcome {outcome.id} is not monitored.", next_step="Name a monitored outcome.")
    design = design_of(outcome, plan, state, versions)
    result = simulate(plan, design, reviews=reviews, seed=seed, progress=progress)
    found = None
    if with_calibration:
        found = calibrate(plan, design, reviews=reviews, seed=seed, progress=progress)
    return PlanSimulation(outcome.id, result, found)


def keep(review: Review, found: Sequence[PlanSimulation], known_at: str) -> None:
    """Keep what simulating found in the store, under the plan's digest; the next version prints it.

    Parameters
    ----------
    review : Review
        The review.
    found : sequence of PlanSimulation
        What was simulated.
    known_at : str
        ISO date-time of the run.
    """
    with open_evidence(review) as store, store.exclusive():
        state = store.state()
        entries = []
        for item in found:
            key = f"simulation/{item.outcome}"
            live = state.get(key)
            replaces = None if live is None else live.seq
            body = plain(item.to_dict())
            entries.append(NewEntry(EntryKind.SIMULATION, key, body, known_at[:10], replaces=replaces))
        store.append(entries, known_at=known_at)
