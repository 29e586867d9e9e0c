"""What the next trial must show for a crossing to come, or to go."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from treering.monitoring.checks import FloatArray, check_positive
from treering.monitoring.finding import find
from treering.monitoring.ledger import ledger_state
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import planned_test
from treering.monitoring.verdict import EFFICACY, crossing, standing
from treering.terms import Verdict

_REACH = 8.0  # standard deviations of the next estimate to each side that are tried
_STEPS = 161


@dataclass(frozen=True, kw_only=True)
class NextTrial:
    """What the next trial must show, as its own estimate on the analysis scale.

    Parameters
    ----------
    information : float
        Information it is expected to bring.
    to_cross_benefit, to_cross_harm : float or None
        Estimate closest to the other side with which the benefit or harm boundary would be crossed; None
        when no plausible estimate does it, or when no alpha is available for it.
    to_undo : float or None
        Estimate closest to the present one with which a standing crossing would no longer be supported;
        None when nothing stands or no plausible estimate does it.
    """

    information: float
    to_cross_benefit: float | None
    to_cross_harm: float | None
    to_undo: float | None


def next_trial(
    plan: MonitoringPlan,
    looks: Sequence[Look],
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    information: float,
) -> NextTrial:
    """Put a further trial of a given size to the ledger's rules and search for what turns the verdict.

    Plausible are estimates within 8 standard deviations (its own sampling and the present tau2) of the
    pooled one.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    looks : sequence of Look
        All looks so far, oldest first.
    estimates, variances : array_like, shape (k,)
        The trials of the last look.
    information : float
        Information of the next trial.

    Returns
    -------
    NextTrial
    """
    check_positive(information, "information of the next trial")
    y, v = (
        np.asarray(estimates, dtype=float),
        np.append(np.asarray(variances, dtype=float), 1.0 / information),
    )
    verdict = _verdict_with(plan, looks, y, v)
    test = planned_test(plan, y, v[:-1])
    centre = test.pooled.estimate if test else 0.0
    tau2 = 0.0 if test is None or np.isnan(test.pooled.tau2) else test.pooled.tau2
    reach = _REACH * float(np.sqrt(1.0 / information + tau2))
    good = centre + plan.benefit_direction * np.linspace(-reach, reach, _STEPS)
    stands = standing(looks).verdict
    if stands in EFFICACY:
        toward = good if stands is Verdict.HARM_CROSSED else good[::-1]
        path = toward[_STEPS // 2 :]
        undo = _first(lambda value: verdict(value) is not stands, path)
        return NextTrial(information=information, to_cross_benefit=None, to_cross_harm=None, to_undo=undo)
    return NextTrial(
        information=information,
        to_cross_benefit=_first(lambda value: verdict(value) is Verdict.BENEFIT_CROSSED, good),
        to_cross_harm=_first(lambda value: verdict(value) is Verdict.HARM_CROSSED, good[::-1]),
        to_undo=None,
    )


def _verdict_with(
    plan: MonitoringPlan, looks: Sequence[Look], y: FloatArray, v: FloatArray
) -> Callable[[float], Verdict | None]:
    """Return which crossing the next look would show for an estimate of the next trial.

    The critical value depends on the information alone, so it is found once.
    """
    first = planned_test(plan, np.append(y, 0.0), v)
    found = find(plan, ledger_state(plan, looks), first, new_data=True)
    may_stand = standing(looks).verdict in EFFICACY
    critical = found.boundary if found.spends else (found.redrawn if may_stand else None)

    def verdict(value: float) -> Verdict | None:
        test = planned_test(plan, np.append(y, value), v)
        return None if test is None or test.z is None else crossing(plan, test.z, critical)

    return verdict


def _first(holds: Callable[[float], bool], path: FloatArray) -> float | None:
    """Return the first point of a path at which something holds, closed in on by halving."""
    before: float | None = None
    for value in (float(point) for point in path):
        if holds(value):
            return value if before is None else _halved(holds, before, value)
        before = value
    return None


def _halved(holds: Callable[[float], bool], outside: float, inside: float) -> float:
    """Close in on the point where `holds` becomes true."""
    for _ in range(40):
        middle = 0.5 * (outside + inside)
        outside, inside = (outside, middle) if holds(middle) else (middle, inside)
    return inside
