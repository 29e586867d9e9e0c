"""What a look finds: its fraction, whether it can spend, and the critical values that rule it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from treering.monitoring.futility import futility_boundaries
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import PlannedTest
from treering.monitoring.redrawn import SAME, Used, critical_value, redrawn_value, spent_at
from treering.monitoring.verdict import Finding

LEAST_ALPHA = 1e-12  # alpha left below this is rounding, not a test


@dataclass(frozen=True, kw_only=True)
class LedgerState:
    """What the current ledger of an outcome has used up.

    Parameters
    ----------
    carried : float
        Alpha spent by earlier ledgers of the outcome.
    spent : float
        Cumulative alpha spent so far, `carried` included.
    available : float
        Alpha of this ledger: the plan's alpha less `carried`.
    highest : float
        Highest fraction that spent in this ledger; 0 before the first.
    used : tuple of (information, critical Z)
        Looks of this ledger that spent.
    finished : bool
        Whether a look at or past the required information has spent all that was left.
    """

    carried: float
    spent: float
    available: float
    highest: float
    used: tuple[Used, ...]
    finished: bool


def find(plan: MonitoringPlan, state: LedgerState, test: PlannedTest | None, *, new_data: bool) -> Finding:
    """Work out fraction, spending and critical values of a look.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    state : LedgerState
        What the ledger has used up.
    test : PlannedTest or None
        The planned test now; None without a usable trial.
    new_data : bool
        Whether verified data came in since the last look; without it nothing is spent.

    Returns
    -------
    Finding
    """
    information = test.information if test else 0.0
    fraction = information / plan.required_information
    if abs(fraction - 1.0) < SAME:
        fraction = 1.0  # a sum of trials that meets the required information up to rounding has met it
    left = state.available > LEAST_ALPHA
    testable = test is not None and test.z is not None
    room = new_data and left and not state.finished and fraction > state.highest * (1.0 + SAME)
    spends = testable and room
    futile, inflation = _futility(plan, state, fraction) if plan.futility and left else (None, None)
    return Finding(
        z=test.z if test else None,
        fraction=fraction,
        highest=state.highest,
        spends=spends,
        finished=state.finished,
        boundary=_boundary(plan, state, information, fraction) if spends else None,
        redrawn=_redrawn(plan, state, information) if testable and left and not spends else None,
        futility=futile if testable and spends else None,
        redrawn_futility=futile if testable and not spends else None,
        inflation=inflation,
    )


def _boundary(plan: MonitoringPlan, state: LedgerState, information: float, fraction: float) -> float | None:
    """Return the critical Z that spends what the function newly allows."""
    increment = state.carried + spent_at(plan, fraction, state.available) - state.spent
    return critical_value(state.used, information, increment, sides=plan.sides)


def _redrawn(plan: MonitoringPlan, state: LedgerState, information: float) -> float | None:
    """Return the critical Z redrawn at the present fraction."""
    return redrawn_value(plan, state.used, information, plan.required_information, state.available)


def _futility(plan: MonitoringPlan, state: LedgerState, fraction: float) -> tuple[float | None, float | None]:
    """Return the futility Z at a fraction and the inflation of the required information.

    The looks so far, this one and one at the required information are taken as the planned ones.
    """
    if not 0.0 < fraction < 1.0 - SAME:
        return None, None
    required = plan.required_information
    before = [info / required for info, _ in state.used if info / required < fraction * (1.0 - SAME)]
    drawn = futility_boundaries(
        [*before, fraction],
        alpha=state.available,
        beta=1.0 - plan.power,
        sides=plan.sides,
        spending=plan.spending,
        parameter=plan.spending_parameter,
    )
    value = float(drawn.z[-1])
    return (value if np.isfinite(value) else None), float(drawn.inflation)
