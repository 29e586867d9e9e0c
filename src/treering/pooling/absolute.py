"""Absolute effects: what a pooled effect means per 1000 people at a stated comparator risk.

With comparator risk c the risk in the intervention group is

- risk ratio: RR c,
- odds ratio: OR c / (1 - c + OR c),
- risk difference: c + RD,
- hazard ratio (proportional hazards): 1 - (1 - c)^HR,

and the absolute effect is that risk minus c (Schuenemann et al., Cochrane Handbook for Systematic Reviews of
Interventions, chapters 14 and 15; Altman and Andersen 1999, BMJ 319:1492 for the hazard ratio). The interval
maps the limits of the relative effect; the comparator risk is taken as known.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from numbers import Real
from typing import Protocol

import numpy as np

from treering.errors import AnalysisError
from treering.pooling.arrays import numbers
from treering.pooling.checks import choose
from treering.terms import RATIO_MEASURES, Measure


class Estimated(Protocol):
    """Anything with an estimate and its interval on the analysis scale."""

    @property
    def estimate(self) -> float:
        """Estimate."""
        ...

    @property
    def ci_low(self) -> float:
        """Lower limit."""
        ...

    @property
    def ci_high(self) -> float:
        """Upper limit."""
        ...


@dataclass(frozen=True, slots=True)
class AbsoluteEffect:
    """Expected events per ``per`` people.

    Attributes
    ----------
    measure : str
        Measure of the relative effect.
    comparator_risk : float
        Assumed risk, 0 to 1.
    per : int
        Number of people.
    comparator, intervention : float
        Events expected in each group; ``intervention_low`` and ``intervention_high`` are its limits.
    difference, difference_low, difference_high : float
        Intervention minus comparator: negative is fewer.
    cut : bool
        Whether a risk had to be cut at 0 or 1; the measure then does not fit this comparator risk.
    """

    measure: str
    comparator_risk: float
    per: int
    comparator: float
    intervention: float
    intervention_low: float
    intervention_high: float
    difference: float
    difference_low: float
    difference_high: float
    cut: bool


def _ratio(log_ratio: float) -> float:
    """Ratio of its logarithm; beyond 1e300 every risk is cut at 1 all the same."""
    return math.exp(min(log_ratio, 690.0))


_RISKS: dict[Measure, Callable[[float, float], float]] = {
    Measure.RISK_RATIO: lambda c, e: _ratio(e) * c,
    Measure.ODDS_RATIO: lambda c, e: _ratio(e) * c / (1 - c + _ratio(e) * c),
    Measure.PETO_ODDS_RATIO: lambda c, e: _ratio(e) * c / (1 - c + _ratio(e) * c),
    Measure.RISK_DIFFERENCE: lambda c, e: c + e,
    Measure.HAZARD_RATIO: lambda c, e: -math.expm1(_ratio(e) * math.log1p(-c)),
}


def absolute_effects(
    effect: Estimated | tuple[float, float, float],
    measure: str | Measure,
    comparator_risk: float | Sequence[float],
    *,
    per: int = 1000,
) -> tuple[AbsoluteEffect, ...]:
    """Turn a pooled effect into events per 1000 people.

    Parameters
    ----------
    effect : object with estimate, ci_low, ci_high, or a tuple of the three
        On the analysis scale (log for ratios), as ``pool`` returns it.
    measure : str
        "risk-ratio", "odds-ratio", "peto-odds-ratio", "risk-difference" or "hazard-ratio".
    comparator_risk : float or sequence of float
        Assumed risks without the intervention, strictly between 0 and 1.
    per : int
        Number of people.

    Returns
    -------
    tuple of AbsoluteEffect
        One for each comparator risk.

    Raises
    ------
    AnalysisError
        A measure without absolute effect, a risk outside (0, 1), an interval that does not hold its estimate.
    """
    kind = choose(Measure, measure, "measure")
    if kind not in _RISKS:
        raise AnalysisError(
            "There is no absolute effect for this measure.", found=str(measure), expected=", ".join(_RISKS)
        )
    values = _limits(effect)
    if not (isinstance(per, Real) and math.isfinite(per) and per >= 1):
        raise AnalysisError("The number of people must be at least 1.", found=per)
    risks = numbers(
        [comparator_risk] if np.ndim(comparator_risk) == 0 else comparator_risk, "comparator_risk"
    )
    return tuple(_one(kind, values, float(risk), per) for risk in risks)


def _limits(effect: Estimated | tuple[float, float, float]) -> tuple[float, float, float]:
    """Estimate with its lower and upper limit."""
    if not isinstance(effect, tuple):
        try:
            effect = (effect.estimate, effect.ci_low, effect.ci_high)
        except AttributeError:
            raise AnalysisError(
                "An effect is a pooled effect or its estimate, lower and upper limit.",
                found=type(effect).__name__,
                expected="a result of pool, or a tuple of three numbers",
            ) from None
    values = numbers(effect, "effect").tolist()
    if len(values) != 3 or not all(map(math.isfinite, values)) or not values[1] <= values[0] <= values[2]:
        raise AnalysisError("The interval does not hold its estimate.", found=effect)
    return values[0], values[1], values[2]


def distance(value: float, measure: str | Measure) -> float:
    """Turn a minimally important difference into a distance on the analysis scale.

    Parameters
    ----------
    value : float
        As people state it: a ratio other than 1 for ratios (0.8 and 1.25 are equally far), else a difference.
    measure : str
        A ``treering.terms.Measure``.

    Returns
    -------
    float
        Above zero.

    Raises
    ------
    AnalysisError
        An unknown measure, or no distance.
    """
    ratio = choose(Measure, measure, "measure") in RATIO_MEASURES
    if not isinstance(value, Real):
        raise AnalysisError("A minimally important difference is a number.", found=value)
    found = abs(math.log(value)) if ratio and value > 0 else (0.0 if ratio else abs(value))
    if not (math.isfinite(found) and found > 0):
        raise AnalysisError(
            "This is no minimally important difference.",
            found=value,
            expected="a ratio above 0 other than 1" if ratio else "a number other than 0",
        )
    return found


def _one(measure: Measure, values: tuple[float, float, float], risk: float, per: int) -> AbsoluteEffect:
    """Absolute effect at one comparator risk."""
    if not 0 < risk < 1:
        raise AnalysisError("comparator_risk must lie strictly between 0 and 1.", found=risk)
    raw = [_RISKS[measure](risk, value) for value in values]
    middle, low, high = (per * min(max(r, 0.0), 1.0) for r in raw)
    base = per * risk
    return AbsoluteEffect(
        measure=measure.value,
        comparator_risk=risk,
        per=per,
        comparator=base,
        intervention=middle,
        intervention_low=low,
        intervention_high=high,
        difference=middle - base,
        difference_low=low - base,
        difference_high=high - base,
        cut=any(r < 0 or r > 1 for r in raw),
    )
