"""What the plan's boundary is worth for this very review: seeded simulation of whole reviews.

Effects are drawn as normal with the design's information, or as counts of a binary outcome. Results do not
depend on the number of cores: every chunk of reviews has its own stream, and sums are taken in the order of
the chunks.
"""

from __future__ import annotations

import multiprocessing
import os
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from functools import partial
from typing import TypeVar

import numpy as np

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.simulate_kernel import Pooled, pool_chunk
from treering.monitoring.simulate_rules import Rule, rules_of, tally
from treering.monitoring.simulation_result import SimulationResult, rule_row

CHUNK = 2000  # reviews with a stream of their own; about a second-level cache of numbers

_Found = TypeVar("_Found")

#: Called with chunks done and chunks in all.
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Task:
    """One chunk of reviews: everything a worker needs.

    Parameters
    ----------
    plan, design : MonitoringPlan, SimulationDesign
        What is simulated.
    tau2, effect : float
        What is true.
    reviews : int
        Reviews in the chunk.
    seed : int
        Seed of the simulation.
    place : tuple of int
        Number of the scenario and of the chunk: the key of the stream.
    """

    plan: MonitoringPlan
    design: SimulationDesign
    tau2: float
    effect: float
    reviews: int
    seed: int
    place: tuple[int, int]

    def pooled(self) -> Pooled:
        """Draw the reviews from the chunk's own stream and pool them."""
        rng = np.random.default_rng(np.random.SeedSequence(self.seed, spawn_key=self.place))
        return pool_chunk(
            self.plan, self.design, tau2=self.tau2, effect=self.effect, reviews=self.reviews, rng=rng
        )


def simulate(
    plan: MonitoringPlan,
    design: SimulationDesign,
    *,
    reviews: int = 20_000,
    seed: int = 1,
    effects: Sequence[float] | None = None,
    workers: int | None = None,
    progress: Progress | None = None,
) -> SimulationResult:
    """Simulate whole reviews under a plan and count how the rules err.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    design : SimulationDesign
        Trial sizes, looks, and the range of tau2.
    reviews : int
        Reviews per true effect and tau2.
    seed : int
        Seed of all streams.
    effects : sequence of float, optional
        True mean effects; left out, none and the effect to detect in the tested direction.
    workers : int, optional
        Processes; left out, one for each core this process may use. 1 stays in this process.
    progress : callable, optional
        Called with chunks done and chunks in all.

    Returns
    -------
    SimulationResult

    Raises
    ------
    AnalysisError
        When the number of reviews is not 1 or more.
    """
    if reviews < 1:
        raise AnalysisError("No review to simulate.", found=reviews, expected="1 or more")
    truths = (0.0, abs(plan.effect) * plan.tested_direction) if effects is None else tuple(effects)
    scenarios = [(effect, tau2) for effect in truths for tau2 in design.tau2]
    rules = rules_of(plan, design)
    tasks = chunked(plan, design, scenarios, reviews, seed)
    sums = np.zeros((len(scenarios), len(rules), 9))
    for task, found in zip(
        tasks, run_chunks(partial(_tallies, rules), tasks, workers, progress), strict=True
    ):
        sums[task.place[0]] += found
    rows = tuple(
        rule_row(rule.name, tau2, effect, sums[number, place])
        for number, (effect, tau2) in enumerate(scenarios)
        for place, rule in enumerate(rules)
    )
    return SimulationResult(plan=plan, design=design, seed=seed, reviews=reviews, rows=rows)


def chunked(
    plan: MonitoringPlan,
    design: SimulationDesign,
    scenarios: Sequence[tuple[float, float]],
    reviews: int,
    seed: int,
) -> list[Task]:
    """Cut a simulation into chunks.

    Parameters
    ----------
    plan, design : MonitoringPlan, SimulationDesign
        What is simulated.
    scenarios : sequence of (effect, tau2)
        What is true.
    reviews : int
        Reviews in each scenario.
    seed : int
        Seed of all streams.

    Returns
    -------
    list of Task
        Scenario by scenario.
    """
    whole, rest = divmod(reviews, CHUNK)
    sizes = [CHUNK] * whole + ([rest] if rest else [])
    return [
        Task(plan, design, tau2, effect, size, seed, (number, chunk))
        for number, (effect, tau2) in enumerate(scenarios)
        for chunk, size in enumerate(sizes)
    ]


def run_chunks(
    work: Callable[[Task], _Found], tasks: Sequence[Task], workers: int | None, progress: Progress | None
) -> Iterator[_Found]:
    """Run the chunks and yield what each finds, in order, in this process or in several.

    Parameters
    ----------
    work : callable
        What to do with a chunk; must be importable.
    tasks : sequence of Task
        The chunks.
    workers : int or None
        Processes; None for one on each core this process may use.
    progress : callable or None
        Called with chunks done and chunks in all.

    Yields
    ------
    object
        What `work` returns.
    """
    count = _cores() if workers is None else workers
    if count <= 1 or len(tasks) == 1:
        yield from _told(map(work, tasks), len(tasks), progress)
        return
    # Fresh processes: a fork could copy a lock that another thread of the caller holds.
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(max_workers=min(count, len(tasks)), mp_context=context) as pool:
        yield from _told(pool.map(work, tasks), len(tasks), progress)


def _cores() -> int:
    """Return the cores this process may use; not every system tells more than how many there are."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _told(found: Iterator[_Found], total: int, progress: Progress | None) -> Iterator[_Found]:
    """Pass results on and tell how many are done."""
    for done, item in enumerate(found, start=1):
        if progress is not None:
            progress(done, total)
        yield item


def _tallies(rules: Sequence[Rule], task: Task) -> FloatArray:
    """Judge one chunk by every rule."""
    pooled = task.pooled()
    return np.array([tally(task.plan, task.design, rule, pooled, task.effect) for rule in rules])
