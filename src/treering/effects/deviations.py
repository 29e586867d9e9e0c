"""Standard deviations from what reports give instead: SE, interval, t or P value.

Cochrane Handbook for Systematic Reviews of Interventions, chapter 6 (in the edition of 2011, section 7.7.3).
All results are on the scale of the measurement.
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
    return record("sd-from-standard-error", f"{HANDBOOK}.2", inputs, result, origin)


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
    quantile = _quantile(level, total - 1, distribution, trial)
    error = _half_width(ci_low, ci_high, trial) / quantile
    inputs: dict[str, float | str] = {
        "ci_low": ci_low,
        "ci_high": ci_high,
        "total": total,
        "level": level,
        "distribution": distribution,
    }
    result = {"sd": error * math.sqrt(total), "standard_error": error, "quantile": quantile}
    return record("sd-from-interval", f"{HANDBOOK}.2", inputs, result, origin)


def sd_from_difference_standard_error(
    standard_error: float,
    intervention_total: float,
    comparator_total: float,
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Find the common SD of two arms from the SE of their mean difference: SD = SE / sqrt(1/n1 + 1/n2).

    Parameters
    ----------
    standard_error : float
        Standard error of the mean difference.
    intervention_total, comparator_total : float
        Participants.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With result ``sd``, taken as that of either arm.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_positive(trial, standard_error=standard_error)
    inputs: dict[str, float | str] = {"standard_error": standard_error}
    return _common_sd(
        "sd-from-difference-standard-error",
        inputs,
        standard_error,
        intervention_total,
        comparator_total,
        {},
        trial,
        origin,
    )


def sd_from_difference_interval(
    ci_low: float,
    ci_high: float,
    intervention_total: float,
    comparator_total: float,
    *,
    level: float = 0.95,
    distribution: str = "t",
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Find the common SD of two arms from the interval of their mean difference.

    Parameters
    ----------
    ci_low, ci_high : float
        Limits of the interval of the mean difference.
    intervention_total, comparator_total : float
        Participants.
    level : float
        Confidence level.
    distribution : str
        "t" with n1 + n2 - 2 degrees of freedom, or "normal".
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
    need_people(trial, intervention_total=intervention_total, comparator_total=comparator_total)
    quantile = _quantile(level, intervention_total + comparator_total - 2, distribution, trial)
    error = _half_width(ci_low, ci_high, trial) / quantile
    inputs: dict[str, float | str] = {
        "ci_low": ci_low,
        "ci_high": ci_high,
        "level": level,
        "distribution": distribution,
    }
    extra = {"standard_error": error, "quantile": quantile}
    return _common_sd(
        "sd-from-difference-interval",
        inputs,
        error,
        intervention_total,
        comparator_total,
        extra,
        trial,
        origin,
    )


def sd_from_t(
    mean_difference: float,
    t_value: float,
    intervention_total: float,
    comparator_total: float,
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Find the common SD of two arms from a t value: SE = |MD / t|, SD = SE / sqrt(1/n1 + 1/n2).

    Parameters
    ----------
    mean_difference, t_value : float
        Not zero; the sign is not used.
    intervention_total, comparator_total : float
        Participants.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``sd`` and ``standard_error``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    _not_null(trial, mean_difference=mean_difference, t_value=t_value)
    error = abs(mean_difference / t_value)
    inputs: dict[str, float | str] = {"mean_difference": mean_difference, "t_value": t_value}
    return _common_sd(
        "sd-from-t",
        inputs,
        error,
        intervention_total,
        comparator_total,
        {"standard_error": error},
        trial,
        origin,
    )


def sd_from_p(
    mean_difference: float,
    p_value: float,
    intervention_total: float,
    comparator_total: float,
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Find the common SD of two arms from the two-sided P value of a t test (n1 + n2 - 2 df).

    Parameters
    ----------
    mean_difference : float
        Not zero; the sign is not used.
    p_value : float
        Exact two-sided P value, between 0 and 1. An upper bound such as P < 0.05 gives an upper bound
        of the SD.
    intervention_total, comparator_total : float
        Participants.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``sd``, ``standard_error`` and ``t``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    _not_null(trial, mean_difference=mean_difference)
    need_probability("p_value", p_value, trial)
    need_people(trial, intervention_total=intervention_total, comparator_total=comparator_total)
    t_value = float(t.isf(p_value / 2, intervention_total + comparator_total - 2))
    error = abs(mean_difference) / t_value
    inputs: dict[str, float | str] = {"mean_difference": mean_difference, "p_value": p_value}
    return _common_sd(
        "sd-from-p",
        inputs,
        error,
        intervention_total,
        comparator_total,
        {"standard_error": error, "t": t_value},
        trial,
        origin,
    )


def _common_sd(
    formula: str,
    inputs: dict[str, float | str],
    error: float,
    first: float,
    second: float,
    extra: dict[str, float],
    trial: str | None,
    origin: str,
) -> Conversion:
    need_people(trial, intervention_total=first, comparator_total=second)
    inputs = {**inputs, "intervention_total": first, "comparator_total": second}
    result = {"sd": error / math.sqrt(1 / first + 1 / second), **extra}
    remarks = ("One SD is assumed for both arms.",)
    return record(formula, f"{HANDBOOK}.3", inputs, result, origin, remarks)


def _quantile(level: float, freedom: float, distribution: str, trial: str | None) -> float:
    need_probability("level", level, trial)
    known = distribution in ("t", "normal")
    need(known, "distribution", distribution, "is unknown", "t or normal", trial)
    tail = (1 - level) / 2
    return float(t.isf(tail, freedom) if distribution == "t" else norm.isf(tail))


def _half_width(low: float, high: float, trial: str | None) -> float:
    need_finite(trial, ci_low=low, ci_high=high)
    need(low < high, "ci_low", low, "is not below ci_high", "a lower limit below the upper one", trial)
    return (high - low) / 2


def _not_null(trial: str | None, **fields: float) -> None:
    need_finite(trial, **fields)
    for field, value in fields.items():
        need(value != 0, field, value, "is zero and gives no SD", "another reported figure", trial)
