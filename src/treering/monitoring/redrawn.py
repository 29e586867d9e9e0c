"""Critical values of one ledger: of a look that spends, and redrawn for one that cannot.

Bounds of earlier looks enter as they were used, with the ratios of information as they are.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from scipy.special import ndtr

from treering.monitoring.boundaries import next_boundary
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.spending import alpha_spent

#: Relative room within which two amounts of information count as equal.
SAME = 1e-9

#: (information, critical Z or None) of a look that spent alpha.
Used = tuple[float, float | None]


def spent_at(plan: MonitoringPlan, fraction: float, available: float) -> float:
    """Return the cumulative alpha the plan's function allows at a fraction.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    fraction : float
        Information fraction; at 1 and above all of `available` is spent.
    available : float
        Alpha of the ledger: the plan's alpha less what earlier ledgers spent.

    Returns
    -------
    float
    """
    spent = alpha_spent(
        [1.0 if fraction >= 1.0 - SAME else fraction],
        alpha=available,
        sides=plan.sides,
        spending=plan.spending,
        parameter=plan.spending_parameter,
    )
    return float(spent[0])


def critical_value(used: Sequence[Used], information: float, increment: float, *, sides: int) -> float | None:
    """Return the critical Z that spends `increment` now, given the bounds used before.

    Recursive integration (Armitage, McPherson and Rowe 1969); Lan and DeMets 1983.

    Parameters
    ----------
    used : sequence of (information, critical Z)
        Earlier looks that spent, information strictly increasing and below `information`; None for a
        look whose bound was out of reach.
    information : float
        Information now.
    increment : float
        Alpha to spend now, total over the tails.
    sides : int
        1 or 2.

    Returns
    -------
    float or None
        None when no Z that a double can hold would be beyond the bound.
    """
    if increment <= 0.0:
        return None
    bounds = [math.inf if bound is None else bound for _, bound in used]
    informations = [*(info for info, _ in used), information]
    z = next_boundary(informations, bounds, alpha_increment=increment, sides=sides).z
    return z if math.isfinite(z) else None


def redrawn_value(
    plan: MonitoringPlan, used: Sequence[Used], information: float, required: float, available: float
) -> float | None:
    """Return the critical Z redrawn at the present fraction.

    The looks that spent with less information than now and before the required one stay as they were;
    the present look is put after them as if no later one had been made. This is what a crossing is
    compared with when no new alpha is available.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    used : sequence of (information, critical Z)
        Looks of the ledger that spent.
    information, required : float
        Information now, and the required information.
    available : float
        Alpha of the ledger.

    Returns
    -------
    float or None
        None when no Z could be beyond it.
    """
    before, increment = _redrawn_increment(plan, used, information, required, available)
    return critical_value(before, information, increment, sides=plan.sides)


def _redrawn_increment(
    plan: MonitoringPlan, used: Sequence[Used], information: float, required: float, available: float
) -> tuple[list[Used], float]:
    """Return the looks that stay before the redrawn one, and the alpha it would spend."""
    before = [
        (info, bound)
        for info, bound in used
        if info < information * (1 - SAME) and info < required * (1 - SAME)
    ]
    already = spent_at(plan, before[-1][0] / required, available) if before else 0.0
    return before, spent_at(plan, information / required, available) - already


def surely_beyond_redrawn(
    plan: MonitoringPlan,
    used: Sequence[Used],
    information: float,
    required: float,
    available: float,
    *,
    z: float,
) -> bool | None:
    """Say without integration whether a magnitude of Z is beyond the redrawn boundary, where that is sure.

    The chance to be beyond the boundary now is at least what this look spends and at most all that is
    spent up to it, so the boundary lies between the quantiles of the two.

    Parameters
    ----------
    plan, used, information, required, available
        As in `redrawn_value`.
    z : float
        Magnitude of Z (one-sided: Z in the tested direction).

    Returns
    -------
    bool or None
        None when only the integration can tell.
    """
    _, increment = _redrawn_increment(plan, used, information, required, available)
    if increment <= 0.0:
        return False
    tail = float(ndtr(-z))
    if tail * plan.sides <= increment:
        return True
    if tail * plan.sides > spent_at(plan, information / required, available):
        return False
    return None


def fresh_values(
    plan: MonitoringPlan, informations: Sequence[float], required: float
) -> tuple[float | None, ...]:
    """Return the critical values of a whole curve drawn anew, None once the required one is reached.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    informations : sequence of float
        Information of each look, strictly increasing.
    required : float
        Required information.

    Returns
    -------
    tuple of float or None
    """
    used: list[Used] = []
    values: list[float | None] = []
    finished = False
    for information in informations:
        value = None if finished else redrawn_value(plan, used, information, required, plan.alpha)
        finished = finished or information >= required * (1 - SAME)
        used.append((information, value))
        values.append(value)
    return tuple(values)
