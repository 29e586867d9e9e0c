"""The alpha that a plan must be given so that its simulated false alarms stay within the stated rate."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass, replace
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtr

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.redrawn import SAME
from treering.monitoring.simulate import Progress, Task, chunked, run_chunks
from treering.monitoring.simulate_rules import PLAN, planned_kind, spending_rule
from treering.monitoring.simulation_result import share_error

_LEAST_SHARE = 1.0 / 50.0  # smallest part of the plan's alpha that is tried
_HALVINGS = 24
_LONGEST = 200  # times that a design is repeated at most


@dataclass(frozen=True, kw_only=True)
class Calibration:
    """What to write in the protocol instead of the alpha in force.

    Parameters
    ----------
    alpha : float
        Proposed alpha; the plan's own when that holds.
    target : float
        False-alarm rate to hold: the plan's alpha.
    tau2 : tuple of float
        Between-trial variances over which it is held.
    before, after : tuple of float
        Simulated false-alarm rate at each tau2 with the plan's alpha and with the proposed one.
    after_error : tuple of float
        Monte Carlo standard errors of `after`.
    required : float
        Required information under the proposed alpha.
    reviews, seed : int
        Reviews for each tau2, and the seed.
    """

    alpha: float
    target: float
    tau2: tuple[float, ...]
    before: tuple[float, ...]
    after: tuple[float, ...]
    after_error: tuple[float, ...]
    required: float
    reviews: int
    seed: int

    def to_dict(self) -> dict[str, Any]:
        """Return the proposal as plain JSON values.

        Returns
        -------
        dict
        """
        return {name: list(v) if isinstance(v, tuple) else v for name, v in asdict(self).items()}


def calibrate(
    plan: MonitoringPlan,
    design: SimulationDesign,
    *,
    reviews: int = 20_000,
    seed: int = 1,
    workers: int | None = None,
    progress: Progress | None = None,
) -> Calibration:
    """Propose the largest alpha, not above the plan's, whose false alarms stay within the plan's alpha.

    A smaller alpha needs more information; the design is continued with trials of the same sizes until
    the required information is reached, so that no alpha is left uncounted.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan; its alpha is the rate to hold.
    design : SimulationDesign
        Trial sizes, looks, and the range of tau2 over which the rate must hold.
    reviews : int
        Reviews per tau2.
    seed : int
        Seed of all streams.
    workers : int, optional
        Processes; left out, one for each core this process may use.
    progress : callable, optional
        Called with chunks done and chunks in all.

    Returns
    -------
    Calibration

    Raises
    ------
    AnalysisError
        When even a fiftieth of the plan's alpha raises too many false alarms.
    """
    long = continued(design, replace(plan, alpha=plan.alpha * _LEAST_SHARE).required_information)
    tasks = chunked(plan, long, [(0.0, tau2) for tau2 in long.tau2], reviews, seed)
    found = run_chunks(partial(_statistics, planned_kind(plan)), tasks, workers, progress)
    parts: list[list[FloatArray]] = [[] for _ in long.tau2]
    for task, statistic in zip(tasks, found, strict=True):
        parts[task.place[0]].append(statistic)
    paths = [np.concatenate(part, axis=1) for part in parts]
    before = _rates(plan, long, paths, plan.alpha)
    alpha = plan.alpha if max(before) <= plan.alpha else _largest_alpha(plan, long, paths)
    after = _rates(plan, long, paths, alpha)
    return Calibration(
        alpha=alpha,
        target=plan.alpha,
        tau2=long.tau2,
        before=before,
        after=after,
        after_error=tuple(share_error(rate * reviews, reviews) for rate in after),
        required=replace(plan, alpha=alpha).required_information,
        reviews=reviews,
        seed=seed,
    )


def continued(design: SimulationDesign, required: float) -> SimulationDesign:
    """Continue a design with trials of the same sizes until the required information is in.

    Parameters
    ----------
    design : SimulationDesign
        The design.
    required : float
        Information to reach.

    Returns
    -------
    SimulationDesign
        The same design when it reaches the required information already.
    """
    trials = len(design.information)
    times = max(math.ceil(required * (1.0 - SAME) / sum(design.information)), 1)
    if times > _LONGEST:
        raise AnalysisError(
            "The design is far too small to reach the required information.",
            found=f"{sum(design.information):.3g} of {required:.3g}",
            next_step="Give more or larger trials.",
        )
    looks = [round_ * trials + look for round_ in range(times) for look in design.looks]
    counts = design.counts
    if counts is not None:
        counts = replace(
            counts,
            intervention_total=counts.intervention_total * times,
            comparator_total=counts.comparator_total * times,
        )
    return replace(design, information=design.information * times, looks=tuple(looks), counts=counts)


def _statistics(kind: str, task: Task) -> FloatArray:
    """Return the planned Z of a chunk, so that a large value crosses."""
    pooled = task.pooled()
    if kind == "common":
        statistic = pooled.common_mean / pooled.common_error
    else:
        statistic = pooled.mean / (pooled.wald if kind == "wald" else pooled.hartung)
    plan = task.plan
    oriented: FloatArray = statistic * plan.tested_direction if plan.sides == 1 else np.abs(statistic)
    if kind != "hartung":
        return oriented
    z: FloatArray = -ndtri(stdtr(np.maximum(pooled.k - 1.0, 1.0), -oriented))
    return np.where(pooled.k < 2.0, -np.inf, z)


def _rates(
    plan: MonitoringPlan, design: SimulationDesign, paths: Sequence[FloatArray], alpha: float
) -> tuple[float, ...]:
    """Return the share of reviews that cross at any look, for each tau2, at a given alpha."""
    rule = spending_rule(replace(plan, alpha=alpha), design, PLAN, planned_kind(plan))
    return tuple(float(_crosses(path, rule.critical).mean()) for path in paths)


def _crosses(path: FloatArray, critical: FloatArray) -> NDArray[np.bool_]:
    """Return which reviews cross at a look that has a boundary."""
    drawn = np.isfinite(critical)
    crossed: NDArray[np.bool_] = np.any(path[drawn] >= critical[drawn, None], axis=0)
    return crossed


def _largest_alpha(plan: MonitoringPlan, design: SimulationDesign, paths: Sequence[FloatArray]) -> float:
    """Halve the interval in which the rate passes the target; the lower end holds it."""
    low, high = np.log(plan.alpha * _LEAST_SHARE), np.log(plan.alpha)
    if max(_rates(plan, design, paths, float(np.exp(low)))) > plan.alpha:
        raise AnalysisError(
            "No usable alpha holds the false-alarm rate over this range of tau2.",
            found=f"more than {plan.alpha:g} even at alpha {np.exp(low):.2g}",
            next_step="Choose modified Knapp-Hartung tests, a larger diversity, or a narrower range of tau2.",
        )
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        held = max(_rates(plan, design, paths, float(np.exp(middle)))) <= plan.alpha
        low, high = (middle, high) if held else (low, middle)
    return float(np.exp(low))
