"""When will we know: the looks that ongoing trials are likely to bring, and what the next one must show.

Chances treat Z as a Brownian motion from where it stands, on the information that heterogeneity leaves
(1/variance times 1 - D2 of the plan). They are a guide for planning the panel's year, not a test.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from datetime import date as calendar_date
from datetime import timedelta
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray, check_positive
from treering.monitoring.crossing import crossing_probabilities
from treering.monitoring.ledger import ledger_state
from treering.monitoring.look import Look
from treering.monitoring.next_trial import NextTrial, next_trial
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.redrawn import SAME, Used, critical_value, spent_at

SCENARIOS = ("no effect", "effect to detect", "present trend")


@dataclass(frozen=True, kw_only=True)
class OngoingTrial:
    """A registered trial that has not reported.

    Parameters
    ----------
    trial : str
        Identifier.
    information : float or None
        Information it is expected to bring (planned size times information per participant); None when
        its size is not known.
    end : str or None
        Expected end, ISO 8601; None when not known.
    """

    trial: str
    information: float | None
    end: str | None


@dataclass(frozen=True, kw_only=True)
class ForecastStep:
    """The look that ongoing trials expected on one day are likely to bring.

    Parameters
    ----------
    trials : tuple of str
        The trials.
    date : str
        Expected day of the result: the end and the lag; the day asked when that is past.
    overdue : tuple of str
        Those whose expected day is past.
    fraction : float
        Information fraction with them and all earlier ones.
    boundary : float or None
        Critical Z at that look; None where no alpha is available.
    benefit, harm : dict of str to float
        Chance that the benefit or harm boundary is crossed at this look or an earlier one to come, if
        there is no effect, the effect to detect, or the present estimate.
    """

    trials: tuple[str, ...]
    date: str
    overdue: tuple[str, ...]
    fraction: float
    boundary: float | None
    benefit: dict[str, float]
    harm: dict[str, float]


@dataclass(frozen=True, kw_only=True)
class Forecast:
    """When will we know.

    Parameters
    ----------
    steps : tuple of ForecastStep
        Likely looks, in order of date.
    reaches : str or None
        Day at which the fraction is expected to reach 1; None when the known trials do not bring it there.
    next_trial : NextTrial or None
        What the first expected trial must show, on its own; None without one.
    not_dated : tuple of str
        Ongoing trials without a known size or end; they are in none of the figures.
    """

    steps: tuple[ForecastStep, ...]
    reaches: str | None
    next_trial: NextTrial | None
    not_dated: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """Return the forecast as plain JSON values.

        Returns
        -------
        dict
        """
        return {
            "steps": [
                asdict(step) | {"trials": list(step.trials), "overdue": list(step.overdue)}
                for step in self.steps
            ],
            "reaches": self.reaches,
            "next_trial": None if self.next_trial is None else asdict(self.next_trial),
            "not_dated": list(self.not_dated),
        }


def forecast(
    plan: MonitoringPlan,
    looks: Sequence[Look],
    estimates: ArrayLike,
    variances: ArrayLike,
    ongoing: Sequence[OngoingTrial],
    *,
    today: str,
    lag_days: int = 365,
) -> Forecast:
    """Say when ongoing trials are likely to bring the fraction to 1, and with what chance to cross by then.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    looks : sequence of Look
        All looks so far, oldest first; at least one with a trial.
    estimates, variances : array_like, shape (k,)
        The trials of the last look.
    ongoing : sequence of OngoingTrial
        Registered trials without a result.
    today : str
        The day asked, ISO 8601.
    lag_days : int
        Days from a trial's end to its result.

    Returns
    -------
    Forecast

    Raises
    ------
    AnalysisError
        When there is no look with a trial, or a date or size cannot be used.
    """
    last = looks[-1] if looks else None
    if last is None or last.estimate is None:
        raise AnalysisError(
            "A forecast starts from a look with at least one trial.",
            next_step="Ask again after the first look.",
        )
    dated = _expected(ongoing, today, lag_days)
    gathered = last.information + np.cumsum([sum(t.information or 0.0 for t in group) for _, group in dated])
    bounds = _bounds_to_come(plan, looks, gathered)
    chances = {name: _chances(plan, last, gathered, bounds, drift) for name, drift in _drifts(plan, last)}
    steps = tuple(
        ForecastStep(
            trials=tuple(trial.trial for trial in group),
            date=day,
            overdue=tuple(trial.trial for trial in group if _due(trial, lag_days) < _day(today)),
            fraction=float(gathered[i]) / plan.required_information,
            boundary=bounds[i],
            benefit={name: float(benefit[i]) for name, (benefit, _) in chances.items()},
            harm={name: float(harm[i]) for name, (_, harm) in chances.items()},
        )
        for i, (day, group) in enumerate(dated)
    )
    first = dated[0][1][0].information if dated else None
    asked = None if first is None else next_trial(plan, looks, estimates, variances, information=first)
    known = {trial.trial for _, group in dated for trial in group}
    return Forecast(
        steps=steps,
        reaches=_reaches(last, steps),
        next_trial=asked,
        not_dated=tuple(trial.trial for trial in ongoing if trial.trial not in known),
    )


def _expected(
    ongoing: Sequence[OngoingTrial], today: str, lag_days: int
) -> list[tuple[str, list[OngoingTrial]]]:
    """Return the trials with a known size and end by expected day, in order; late ones may come today."""
    days: dict[str, list[OngoingTrial]] = {}
    for trial in ongoing:
        if trial.information is None or trial.end is None:
            continue
        check_positive(trial.information, f"expected information of {trial.trial}")
        days.setdefault(max(_due(trial, lag_days), _day(today)).isoformat(), []).append(trial)
    return sorted(days.items())


def _due(trial: OngoingTrial, lag_days: int) -> calendar_date:
    """Return the day on which the result is expected."""
    return _day(trial.end or "") + timedelta(days=lag_days)


def _day(text: str) -> calendar_date:
    try:
        return calendar_date.fromisoformat(text)
    except ValueError as error:
        raise AnalysisError(
            "A date cannot be read.", found=text, expected="ISO 8601, for example 2031-04-02"
        ) from error


def _bounds_to_come(plan: MonitoringPlan, looks: Sequence[Look], gathered: FloatArray) -> list[float | None]:
    """Return the critical Z of each look to come, None where no alpha is available."""
    state = ledger_state(plan, looks)
    required = plan.required_information
    used: list[Used] = list(state.used)
    highest, spent, finished = state.highest, state.spent, state.finished
    bounds: list[float | None] = []
    for information in (float(value) for value in gathered):
        fraction = information / required
        if finished or state.available <= 0.0 or fraction <= highest * (1.0 + SAME):
            bounds.append(None)
            continue
        allowed = state.carried + spent_at(plan, fraction, state.available)
        bounds.append(critical_value(used, information, allowed - spent, sides=plan.sides))
        used.append((information, bounds[-1]))
        highest, spent, finished = fraction, max(spent, allowed), fraction >= 1.0
    return bounds


def _drifts(plan: MonitoringPlan, last: Look) -> list[tuple[str, float]]:
    """Return the true effect of each scenario on the analysis scale."""
    trend = 0.0 if last.estimate is None else last.estimate
    wanted = abs(plan.effect) * plan.benefit_direction
    return list(zip(SCENARIOS, (0.0, wanted, trend), strict=True))


def _chances(
    plan: MonitoringPlan, last: Look, gathered: FloatArray, bounds: Sequence[float | None], effect: float
) -> tuple[FloatArray, FloatArray]:
    """Return the cumulative chances of a benefit and a harm crossing at the looks to come.

    The path starts at the present Z; what it adds is a Brownian motion on the further information, so the
    bounds are moved by the present score.
    """
    if last.z is None or not len(gathered):
        return np.zeros(len(gathered)), np.zeros(len(gathered))
    left = 1.0 - plan.diversity
    score = last.z * plan.benefit_direction * math.sqrt(last.information * left)
    further = (gathered - last.information) * left
    reach = np.array([np.inf if bound is None else bound for bound in bounds]) * np.sqrt(gathered * left)
    upper, lower = (reach - score) / np.sqrt(further), (-reach - score) / np.sqrt(further)
    if plan.sides == 1:
        toward_benefit = plan.tested_direction == plan.benefit_direction
        upper = upper if toward_benefit else np.full(len(upper), np.inf)
        lower = np.full(len(lower), -np.inf) if toward_benefit else lower
    found = crossing_probabilities(further, upper, lower=lower, drift=effect * plan.benefit_direction)
    return np.cumsum(found.upper), np.cumsum(found.lower)


def _reaches(last: Look, steps: Sequence[ForecastStep]) -> str | None:
    """Return the first day with a fraction of 1 or more."""
    if last.fraction >= 1.0:
        return last.date
    return next((step.date for step in steps if step.fraction >= 1.0), None)
