"""What a crossing rests on: trials, between-trial variance, and the next trial without an effect.

Nothing here is a look and nothing spends: each question is put to the ledger's rules as they stand.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import asdict, dataclass
from itertools import combinations, pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy.optimize import brentq
from scipy.special import ndtri_exp
from scipy.stats import t as student

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.finding import find
from treering.monitoring.ledger import ledger_state
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import PlannedTest, check_trials, planned_test
from treering.monitoring.redrawn import surely_beyond_redrawn
from treering.monitoring.verdict import EFFICACY, crossing, within_futility
from treering.terms import CROSSED, IntervalMethod, Verdict

MOST_SETS = 2000  # sets of trials tried before the search gives up
_FARTHEST = 100.0  # largest null trial tried, as a multiple of the required information


@dataclass(frozen=True, kw_only=True)
class RestsOn:
    """What a crossing rests on.

    Parameters
    ----------
    verdict : Verdict
        The crossing.
    sets : tuple of tuple of str
        Smallest sets of trials whose removal undoes the crossing, all of one size; empty when none of
        at most `searched` trials does.
    searched : int
        Largest number of trials removed at once in the search.
    tau2 : float
        Between-trial variance now, on the squared analysis scale.
    tau2_lost : float or None
        Between-trial variance at which the crossing would be lost at the present boundary; None when no
        value does it.
    null_information : float or None
        Information of the smallest further trial with no effect at all that would undo the crossing;
        None for futility, and when none up to 100 times the required information does. For readers,
        divide it by the information of one participant.
    """

    verdict: Verdict
    sets: tuple[tuple[str, ...], ...]
    searched: int
    tau2: float
    tau2_lost: float | None
    null_information: float | None

    @property
    def sentence(self) -> str:
        """The trials in one sentence."""
        if not self.sets:
            return f"No removal of up to {self.searched} trials undoes the crossing."
        names = "; ".join(" with ".join(trials) for trials in self.sets)
        without = "without it" if len(self.sets) == len(self.sets[0]) == 1 else "without any one of these"
        if len(self.sets[0]) > 1:
            without = "without these together" if len(self.sets) == 1 else "without any of these sets"
        return f"Rests on {names}: {without} the boundary is not crossed."

    def to_dict(self) -> dict[str, Any]:
        """Return the answer as plain JSON values.

        Returns
        -------
        dict
        """
        return asdict(self) | {
            "verdict": str(self.verdict),
            "sets": [list(trials) for trials in self.sets],
            "sentence": self.sentence,
        }


def rests_on(
    plan: MonitoringPlan,
    looks: Sequence[Look],
    trials: Sequence[str],
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    largest: int = 2,
) -> RestsOn:
    """Say what the crossing of the last look rests on.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    looks : sequence of Look
        All looks, oldest first; the last one is the crossing.
    trials, estimates, variances : sequence of str and array_like, shape (k,)
        The trials of that look.
    largest : int
        Largest number of trials to remove at once.

    Returns
    -------
    RestsOn

    Raises
    ------
    AnalysisError
        When the last look is not a crossing.
    """
    names, y, v = check_trials(trials, estimates, variances)
    last = looks[-1] if looks else None
    if last is None or last.verdict not in CROSSED:
        raise AnalysisError(
            "Only a crossing rests on something.",
            found=None if last is None else str(last.verdict),
            expected="a last look with a crossed boundary",
            next_step="Ask after a look that crossed.",
        )
    futile = last.verdict is Verdict.FUTILITY_CROSSED
    stands = _rule(plan, looks, last.verdict)
    sets, searched = _smallest_sets(names, largest, lambda keep: stands(planned_test(plan, y[keep], v[keep])))
    test = planned_test(plan, y, v)
    tau2 = 0.0 if test is None or math.isnan(test.pooled.tau2) else test.pooled.tau2
    return RestsOn(
        verdict=last.verdict,
        sets=sets,
        searched=searched,
        tau2=tau2,
        tau2_lost=_tau2_lost(plan, last, y, v, tau2),
        null_information=None if futile else _null_information(plan, stands, y, v),
    )


def _rule(
    plan: MonitoringPlan, looks: Sequence[Look], verdict: Verdict
) -> Callable[[PlannedTest | None], bool]:
    """Return whether the crossing would stand if the next look found this test."""
    state = ledger_state(plan, looks)
    least = state.highest * plan.required_information  # up to here a look cannot spend
    side = plan.benefit_direction if verdict is Verdict.BENEFIT_CROSSED else -plan.benefit_direction

    def stands(test: PlannedTest | None) -> bool:
        if test is None or test.z is None:
            return False
        if verdict in EFFICACY and (state.finished or test.information <= least):
            oriented = test.z * side
            sure = surely_beyond_redrawn(
                plan, state.used, test.information, plan.required_information, state.available, z=oriented
            )
            if sure is not None:
                return sure
        found = find(plan, state, test, new_data=True)
        if verdict is Verdict.FUTILITY_CROSSED:
            bound = found.futility if found.spends else found.redrawn_futility
            return within_futility(plan, test.z, bound)
        return crossing(plan, test.z, found.boundary if found.spends else found.redrawn) is verdict

    return stands


def _smallest_sets(
    names: tuple[str, ...], largest: int, stands: Callable[[FloatArray], bool]
) -> tuple[tuple[tuple[str, ...], ...], int]:
    """Try all removals of one trial, then of two and so on, within a cap."""
    tried = 0
    for size in range(1, min(largest, len(names)) + 1):
        if tried + math.comb(len(names), size) > MOST_SETS:
            return (), size - 1
        undone = tuple(chosen for chosen, keep in _removals(names, size) if not stands(keep))
        tried += math.comb(len(names), size)
        if undone:
            return undone, size
    return (), min(largest, len(names))


def _removals(names: tuple[str, ...], size: int) -> Iterator[tuple[tuple[str, ...], FloatArray]]:
    """Yield the removed names with the positions that stay."""
    everything = np.arange(len(names))
    for gone in combinations(range(len(names)), size):
        yield tuple(names[i] for i in gone), np.delete(everything, gone)


def _tau2_lost(plan: MonitoringPlan, last: Look, y: FloatArray, v: FloatArray, tau2: float) -> float | None:
    """Return the between-trial variance at which Z meets the critical value that ruled the look."""
    critical = last.boundary if last.spends else last.redrawn_boundary
    if critical is None or last.z is None or last.verdict is Verdict.FUTILITY_CROSSED or len(y) < 2:
        return None

    def excess(value: float) -> float:
        return abs(z_at(plan, y, v, value)) - critical

    scale = max(float(np.max(v)), tau2)
    ladder = tau2 + scale * np.concatenate([[0.0], np.logspace(-4, 8, 121)])
    if excess(ladder[0]) < 0.0:
        return tau2
    for low, high in pairwise(ladder):
        if excess(high) < 0.0:
            return float(brentq(excess, low, high, xtol=1e-12, rtol=1e-10))
    return None


def z_at(plan: MonitoringPlan, y: FloatArray, v: FloatArray, tau2: float) -> float:
    """Return Z of the planned kind of test at a given between-trial variance.

    Parameters
    ----------
    plan : MonitoringPlan
        Its interval says which test; a common-effect plan is tested by Wald.
    y, v : numpy.ndarray, shape (k,)
        Effects on the analysis scale with variances, two trials or more.
    tau2 : float
        Between-trial variance.

    Returns
    -------
    float
        Estimate / standard error, carried from t to the normal scale for the Knapp-Hartung kinds.
    """
    w = 1.0 / (v + tau2)
    mean = float(np.sum(w * y) / np.sum(w))
    error = 1.0 / math.sqrt(float(w.sum()))
    if plan.interval == IntervalMethod.WALD:
        return mean / error
    df = len(y) - 1
    factor = float(np.sum(w * (y - mean) ** 2)) / df
    if plan.interval == IntervalMethod.MODIFIED_KNAPP_HARTUNG:
        factor = max(factor, 1.0)
    statistic = mean / (error * math.sqrt(factor))
    tail: float = student.logsf(abs(statistic), df)
    return math.copysign(float(ndtri_exp(tail)), statistic)


def _null_information(
    plan: MonitoringPlan, stands: Callable[[PlannedTest | None], bool], y: FloatArray, v: FloatArray
) -> float | None:
    """Return the information of the smallest trial at no effect whose addition undoes the crossing."""

    def kept(log_information: float) -> bool:
        return stands(planned_test(plan, np.append(y, 0.0), np.append(v, math.exp(-log_information))))

    start = math.log(float(np.sum(1.0 / v)) * 1e-3)
    ladder = np.linspace(start, max(start, math.log(_FARTHEST * plan.required_information)), 60)
    for low, high in pairwise(ladder):
        if not kept(high):
            return math.exp(_bisect(kept, low, high)) if kept(low) else math.exp(low)
    return None


def _bisect(kept: Callable[[float], bool], low: float, high: float) -> float:
    """Close in on the point where `kept` turns false."""
    for _ in range(40):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if kept(middle) else (low, middle)
    return high
