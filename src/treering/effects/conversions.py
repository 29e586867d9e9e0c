"""Standard errors, P values and effects from one another.

Every function returns a :class:`~treering.effects.record.Conversion`. Where ``scale`` is "log", estimates and
limits are ratios on their natural scale and standard errors are those of the log ratio.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math

import numpy as np
from scipy.stats import norm

from treering.effects import intervals
from treering.effects.record import (
    NOT_STATED,
    Conversion,
    need,
    need_finite,
    need_positive,
    need_probability,
    record,
)
from treering.effects.rows import Rows

P_TO_INTERVAL = "Altman and Bland 2011, How to obtain the confidence interval from a P value, BMJ 343:d2090"
INTERVAL_TO_P = "Altman and Bland 2011, How to obtain the P value from a confidence interval, BMJ 343:d2304"
_LARGEST_LOG = 700.0
SMD_ODDS = "Chinn 2000, Stat Med 19:3127; Hasselblad and Hedges 1995, Psychol Bull 117:167"


def z_from_p(
    p_value: float, *, method: str = "exact", trial: str | None = None, origin: str = NOT_STATED
) -> Conversion:
    r"""Size of the normal test statistic behind a two-sided P value.

    Parameters
    ----------
    p_value : float
        Between 0 and 1.
    method : str
        "exact" (normal quantile) or "approximate", :math:`-0.862 + \sqrt{0.743 - 2.404 \log P}`
        (from memory).
    trial, origin : str
        For messages, and where the figure stands in the report.

    Returns
    -------
    Conversion
        With result ``z``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    z = _z(p_value, method, trial)
    return record(f"z-from-p-{method}", P_TO_INTERVAL, {"p_value": p_value}, {"z": z}, origin, trial=trial)


def standard_error_from_p(
    estimate: float,
    p_value: float,
    *,
    scale: str = "natural",
    method: str = "exact",
    level: float = 0.95,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Find standard error and interval from an estimate and its two-sided P value: SE = |estimate| / z.

    Parameters
    ----------
    estimate : float
        Difference, or ratio on the natural scale; not at no effect.
    p_value : float
        Between 0 and 1.
    scale : str
        "natural" for differences, "log" for ratios.
    method : str
        "exact" or "approximate" z, see :func:`z_from_p`.
    level : float
        Level of the interval.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``estimate`` and ``standard_error`` (scale of the analysis), ``z``, and ``ci_low`` and
        ``ci_high`` (natural scale).

    Raises
    ------
    AnalysisError
        If an input cannot be right, or the estimate is at no effect.
    """
    centre = _on_scale("estimate", estimate, scale, trial)
    need(centre != 0, "estimate", estimate, "is at no effect: P gives no SE", "an interval", trial)
    need_positive(trial, estimate=abs(centre))
    z = _z(p_value, method, trial)
    error = abs(centre) / z
    reach = _level_z(level, trial) * error
    inputs: dict[str, float | str] = {
        "estimate": estimate,
        "p_value": p_value,
        "scale": scale,
        "level": level,
    }
    result = {
        "estimate": centre,
        "standard_error": error,
        "z": z,
        "ci_low": _off_scale(centre - reach, scale),
        "ci_high": _off_scale(centre + reach, scale),
    }
    return record(f"standard-error-from-p-{method}", P_TO_INTERVAL, inputs, result, origin, trial=trial)


def standard_error_from_interval(
    estimate: float,
    ci_low: float,
    ci_high: float,
    *,
    scale: str = "natural",
    level: float = 0.95,
    method: str = "exact",
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Find standard error, z and P value from an estimate and its interval: SE = (upper - lower)/(2 z).

    Parameters
    ----------
    estimate, ci_low, ci_high : float
        Difference, or ratio on the natural scale, with its interval.
    scale : str
        "natural" for differences, "log" for ratios.
    level : float
        Confidence level.
    method : str
        P value from the "exact" normal distribution or the "approximate" formula
        :math:`\exp(-0.717 z - 0.416 z^2)` (from memory).
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``estimate`` and ``standard_error`` (scale of the analysis), ``z`` and ``p_value``.

    Raises
    ------
    AnalysisError
        If the interval does not hold the estimate or is not symmetric on the scale of the analysis.
    """
    need_finite(trial, estimate=estimate, ci_low=ci_low, ci_high=ci_high)
    need_probability("level", level, trial)
    centre = _on_scale("estimate", estimate, scale, trial)
    _check_interval(estimate, ci_low, ci_high, level, scale, trial)
    low, high = _on_scale("ci_low", ci_low, scale, trial), _on_scale("ci_high", ci_high, scale, trial)
    error = (high - low) / (2 * _level_z(level, trial))
    z = centre / error
    inputs: dict[str, float | str] = {
        "estimate": estimate,
        "ci_low": ci_low,
        "ci_high": ci_high,
        "scale": scale,
        "level": level,
    }
    result = {"estimate": centre, "standard_error": error, "z": z, "p_value": _p(abs(z), method, trial)}
    return record(
        f"standard-error-from-interval-{method}", INTERVAL_TO_P, inputs, result, origin, trial=trial
    )


def log_odds_ratio_from_smd(
    smd: float, variance: float, *, trial: str | None = None, origin: str = NOT_STATED
) -> Conversion:
    r"""Log odds ratio from a standardized mean difference: the factor is :math:`\pi/\sqrt 3`.

    Parameters
    ----------
    smd, variance : float
        Standardized mean difference and its variance.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``log_odds_ratio`` and ``variance``.

    Raises
    ------
    AnalysisError
        If the variance is not above zero.
    """
    need_finite(trial, smd=smd)
    need_positive(trial, variance=variance)
    factor = math.pi / math.sqrt(3)
    result = {"log_odds_ratio": factor * smd, "variance": factor**2 * variance}
    inputs: dict[str, float | str] = {"smd": smd, "variance": variance}
    return record("log-odds-ratio-from-smd", SMD_ODDS, inputs, result, origin, _LOGISTIC, trial=trial)


def smd_from_log_odds_ratio(
    log_odds_ratio: float, variance: float, *, trial: str | None = None, origin: str = NOT_STATED
) -> Conversion:
    r"""Find the standardized mean difference of a log odds ratio: the factor is :math:`\sqrt 3/\pi`.

    Parameters
    ----------
    log_odds_ratio, variance : float
        Log odds ratio and its variance.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``smd`` and ``variance``.

    Raises
    ------
    AnalysisError
        If the variance is not above zero.
    """
    need_finite(trial, log_odds_ratio=log_odds_ratio)
    need_positive(trial, variance=variance)
    factor = math.sqrt(3) / math.pi
    result = {"smd": factor * log_odds_ratio, "variance": factor**2 * variance}
    inputs: dict[str, float | str] = {"log_odds_ratio": log_odds_ratio, "variance": variance}
    return record("smd-from-log-odds-ratio", SMD_ODDS, inputs, result, origin, _LOGISTIC, trial=trial)


_LOGISTIC = (
    "Assumes that the underlying measurement has a logistic distribution with equal spread in both arms.",
)


def _check_interval(
    estimate: float, low: float, high: float, level: float, scale: str, trial: str | None
) -> None:
    values = {"estimate": estimate, "ci_low": low, "ci_high": high, "ci_level": level}
    columns = {field: np.array([value], dtype=float) for field, value in values.items()}
    label = np.array([trial if trial is not None else "not named"], dtype=object)
    intervals.check_interval(Rows(columns, label), log_scale=scale == "log")


def _known_method(method: str, trial: str | None) -> None:
    known = method in ("exact", "approximate")
    need(known, "method", method, "is unknown", "exact or approximate", trial)


def _z(p_value: float, method: str, trial: str | None) -> float:
    need_probability("p_value", p_value, trial)
    _known_method(method, trial)
    if method == "exact":
        z = float(norm.isf(p_value / 2))
    else:  # Altman and Bland 2011, from memory.
        z = -0.862 + math.sqrt(0.743 - 2.404 * math.log(p_value))
    within = 0 < z < math.inf  # the approximation turns negative just below P = 1
    need(within, "p_value", p_value, "gives no z by this method", "a P value not so near 0 or 1", trial)
    return z


def _p(z: float, method: str, trial: str | None) -> float:
    _known_method(method, trial)
    # Altman and Bland 2011, from memory.
    return float(2 * norm.sf(z)) if method == "exact" else math.exp(-0.717 * z - 0.416 * z**2)


def _level_z(level: float, trial: str | None) -> float:
    need_probability("level", level, trial)
    z = float(norm.isf((1 - level) / 2))
    need(0 < z < math.inf, "level", level, "gives no quantile", "a level such as 0.95", trial)
    return z


def _on_scale(field: str, value: float, scale: str, trial: str | None) -> float:
    need(scale in ("natural", "log"), "scale", scale, "is unknown", "natural or log", trial)
    need_finite(trial, **{field: value})
    if scale == "natural":
        return value
    need_positive(trial, **{field: value})
    return math.log(value)


def _off_scale(value: float, scale: str) -> float:
    if scale != "log":
        return value
    return math.exp(value) if value < _LARGEST_LOG else math.inf  # refused as a result that is not finite
