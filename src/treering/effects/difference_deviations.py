"""The common standard deviation of two arms from SE, interval, t or P value of their mean difference.

Cochrane Handbook, version 5.1 (2011), section 7.7.3.3. All results are on the scale of the measurement.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math

from scipy.stats import t

from treering.effects.deviations import HANDBOOK, half_width, quantile
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
    value = quantile(level, intervention_total + comparator_total - 2, distribution, trial)
    error = half_width(ci_low, ci_high, trial) / value
    inputs: dict[str, float | str] = {
        "ci_low": ci_low,
        "ci_high": ci_high,
        "level": level,
        "distribution": distribution,
    }
    extra = {"standard_error": error, "quantile": value}
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
    # The quantile leaves the range of numbers where P is next to nothing.
    need(0 < t_value < math.inf, "p_value", p_value, "gives no t value", "an ordinary P value", trial)
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
    return record(formula, f"{HANDBOOK}.3", inputs, result, origin, remarks, trial=trial)


def _not_null(trial: str | None, **fields: float) -> None:
    need_finite(trial, **fields)
    for field, value in fields.items():
        need(value != 0, field, value, "is zero and gives no SD", "another reported figure", trial)
        need_positive(trial, **{field: abs(value)})
