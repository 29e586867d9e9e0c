"""The standard deviation of one arm from what a report gives instead: SE or interval of its mean.

Cochrane Handbook for Systematic Reviews of Interventions, chapter 6 (in the edition of 2011, section 7.7.3).
All results are on the scale of the measurement.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math

from scipy.stats import norm, t

from treering.effects.record import (
    NOT_STATED,
    Conversion,
    need,
    need_finite,
    need_people,
    need_positive,
    need_probability,
    record,
)

HANDBOOK = "Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), section 7.7.3"


def sd_from_standard_error(
    standard_error: float, total: float, *, trial: str | None = None, origin: str = NOT_STATED
) -> Conversion:
    """SD of one arm from the standard error of its mean: SD = SE sqrt(n).

    Parameters
    ----------
    standard_error : float
        Standard error of the arm's mean, above zero.
    total : float
        Participants of the arm.
    trial, origin : str
        For messages, and where the figure stands in the report.

    Returns
    -------
    Conversion
        With result ``sd``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_positive(trial, standard_error=standard_error)
    need_people(trial, total=total)
    inputs: dict[str, float | str] = {"standard_error": standard_error, "total": total}
    result = {"sd": standard_error * math.sqrt(total)}
    return record("sd-from-standard-error", f"{HANDBOOK}.2", inputs, result, origin, trial=trial)


def sd_from_interval(
    ci_low: float,
    ci_high: float,
    total: float,
    *,
    level: float = 0.95,
    distribution: str = "t",
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """SD of one arm from the interval of its mean: SD = sqrt(n) (upper - lower)/(2 q).

    Parameters
    ----------
    ci_low, ci_high : float
        Limits of the interval of the arm's mean.
    total : float
        Participants of the arm.
    level : float
        Confidence level.
    distribution : str
        Whether q is a quantile of "t" with n - 1 degrees of freedom or of the "normal" distribution.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``sd``, ``standard_error`` and ``quantile``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_people(trial, total=total)
    value = quantile(level, total - 1, distribution, trial)
    error = half_width(ci_low, ci_high, trial) / value
    inputs: dict[str, float | str] = {
        "ci_low": ci_low,
        "ci_high": ci_high,
        "total": total,
        "level": level,
        "distribution": distribution,
    }
    result = {"sd": error * math.sqrt(total), "standard_error": error, "quantile": value}
    return record("sd-from-interval", f"{HANDBOOK}.2", inputs, result, origin, trial=trial)


def quantile(level: float, freedom: float, distribution: str, trial: str | None) -> float:
    """Two-sided quantile of the t or normal distribution.

    Parameters
    ----------
    level : float
        Confidence level.
    freedom : float
        Degrees of freedom, for "t".
    distribution : str
        "t" or "normal".
    trial : str or None
        For messages.

    Returns
    -------
    float
        Quantile, above zero.

    Raises
    ------
    AnalysisError
        If the level is not between 0 and 1, or the distribution is unknown.
    """
    need_probability("level", level, trial)
    known = distribution in ("t", "normal")
    need(known, "distribution", distribution, "is unknown", "t or normal", trial)
    tail = (1 - level) / 2
    value = float(t.isf(tail, freedom) if distribution == "t" else norm.isf(tail))
    need(0 < value < math.inf, "level", level, "gives no quantile", "a level such as 0.95", trial)
    return value


def half_width(low: float, high: float, trial: str | None) -> float:
    """Half the width of an interval, refusing limits in the wrong order.

    Parameters
    ----------
    low, high : float
        Limits.
    trial : str or None
        For messages.

    Returns
    -------
    float
        Above zero.

    Raises
    ------
    AnalysisError
        If a limit is not finite, or the lower is not below the upper one.
    """
    need_finite(trial, ci_low=low, ci_high=high)
    need(low < high, "ci_low", low, "is not below ci_high", "a lower limit below the upper one", trial)
    return (high - low) / 2
