"""The curve redrawn by publication date: what it would have looked like, had the team looked then.

It is hindsight. It forgets when the team learned of each trial and what alpha was spent, and it never
gives a verdict; it stands beside the ledger with its label.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import as_planned_test, check_trials, pool_as_planned
from treering.monitoring.redrawn import SAME, redrawn_value

LABEL = "hindsight"


@dataclass(frozen=True, kw_only=True)
class HindsightPoint:
    """One publication date of the redrawn curve.

    Parameters
    ----------
    date : str
        Publication date as given.
    trials : tuple of str
        Trials published on it.
    k : int
        Trials published up to and with it.
    estimate, standard_error : float
        Planned estimate of these trials on the analysis scale.
    information, fraction : float
        Their information, and its share of the required one.
    z : float or None
        Z of the planned test; None where it cannot be made.
    boundary : float or None
        Critical Z of a curve drawn anew; None where nothing could cross, and after fraction 1.
    beyond : bool
        Whether Z is beyond it (one-sided: in the tested direction).
    """

    date: str
    trials: tuple[str, ...]
    k: int
    estimate: float
    standard_error: float
    information: float
    fraction: float
    z: float | None
    boundary: float | None
    beyond: bool


@dataclass(frozen=True, kw_only=True)
class HindsightCurve:
    """The redrawn curve with its label.

    Parameters
    ----------
    points : tuple of HindsightPoint
        In order of publication.
    required : float
        Required information.
    label : str
        "hindsight": to be shown with the curve.
    """

    points: tuple[HindsightPoint, ...]
    required: float
    label: str = LABEL

    def to_dict(self) -> dict[str, Any]:
        """Return the curve as plain JSON values.

        Returns
        -------
        dict
        """
        points = [asdict(point) | {"trials": list(point.trials)} for point in self.points]
        return {"label": self.label, "required": self.required, "points": points}


def hindsight(
    plan: MonitoringPlan,
    *,
    dates: Sequence[str],
    trials: Sequence[str],
    estimates: ArrayLike,
    variances: ArrayLike,
) -> HindsightCurve:
    """Redraw the monitoring by publication date, as if the team had looked at each.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    dates : sequence of str
        Publication date (or year) of each trial, in a form that sorts; equal dates enter together.
    trials : sequence of str
        Trial identifiers.
    estimates, variances : array_like, shape (k,)
        Effects on the analysis scale with variances.

    Returns
    -------
    HindsightCurve

    Raises
    ------
    AnalysisError
        When the trials cannot be analysed.
    """
    names, y, v = check_trials(trials, estimates, variances)
    if len(dates) != len(names):
        raise AnalysisError(
            "Dates and trials differ in number.", found=len(dates), expected=f"{len(names)} dates"
        )
    points: list[HindsightPoint] = []
    used: list[tuple[float, float | None]] = []
    for day in sorted(set(dates)):
        known = np.array([date <= day for date in dates])
        fresh = tuple(name for name, date in zip(names, dates, strict=True) if date == day)
        point = _point(plan, day, fresh, y[known], v[known], used)
        points.append(point)
        if point.z is not None:
            used.append((point.information, point.boundary))
    return HindsightCurve(points=tuple(points), required=plan.required_information)


def _point(
    plan: MonitoringPlan,
    day: str,
    fresh: tuple[str, ...],
    y: FloatArray,
    v: FloatArray,
    used: Sequence[tuple[float, float | None]],
) -> HindsightPoint:
    """Draw one point after the points before it."""
    test = as_planned_test(plan, pool_as_planned(plan, y, v), float(np.sum(1.0 / v)))
    required = plan.required_information
    finished = any(info >= required * (1.0 - SAME) for info, _ in used)
    boundary = None
    if test.z is not None and not finished:
        boundary = redrawn_value(plan, used, test.information, required, plan.alpha)
    z = test.z if test.z is not None else 0.0
    reach = abs(z) if plan.sides == 2 else z * plan.tested_direction
    return HindsightPoint(
        date=day,
        trials=fresh,
        k=len(y),
        estimate=test.pooled.estimate,
        standard_error=test.pooled.standard_error,
        information=test.information,
        fraction=test.information / required,
        z=test.z,
        boundary=boundary,
        beyond=boundary is not None and reach >= boundary,
    )
