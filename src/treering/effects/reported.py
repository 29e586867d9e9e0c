"""Effects that a report already gives: an estimate with its interval, standard error or P value.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np
from scipy.stats import norm

from treering.effects import checks, intervals
from treering.effects.rows import Effects, FloatArray, Rows, refuse


def two_sided_z(level: FloatArray | float) -> FloatArray:
    """Return the normal quantile of a two-sided confidence level, 1.96 for 0.95.

    Parameters
    ----------
    level : array_like
        Confidence level, between 0 and 1.

    Returns
    -------
    ndarray
        Quantile, above zero.
    """
    return np.asarray(norm.isf((1 - np.asarray(level, dtype=float)) / 2))


def ratio_from_interval(rows: Rows) -> Effects:
    r"""Log ratio and variance from a ratio and its interval on the natural scale.

    :math:`SE = \{\log(upper) - \log(lower)\}/(2 z)` (Parmar, Torri and Stewart 1998, Stat Med 17:2815,
    equation 7; Tierney et al. 2007, Trials 8:16).

    Parameters
    ----------
    rows : Rows, k trials
        With ``estimate ci_low ci_high`` on the natural scale and ``ci_level``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    intervals.check_interval(rows, log_scale=True)
    width = np.log(rows["ci_high"]) - np.log(rows["ci_low"])
    return Effects.plain(np.log(rows["estimate"]), (width / (2 * two_sided_z(rows["ci_level"]))) ** 2)


def difference_from_interval(rows: Rows) -> Effects:
    """Estimate and variance from an interval on the scale of the analysis: SE = (upper - lower)/(2 z).

    Parameters
    ----------
    rows : Rows, k trials
        With ``estimate ci_low ci_high`` on the natural scale and ``ci_level``.

    Returns
    -------
    Effects
        Shape (k,), scale of the estimate.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    intervals.check_interval(rows, log_scale=False)
    width = rows["ci_high"] - rows["ci_low"]
    return Effects.plain(rows["estimate"], (width / (2 * two_sided_z(rows["ci_level"]))) ** 2)


def from_standard_error(rows: Rows) -> Effects:
    """Estimate and standard error as reported, both on the scale of the analysis.

    Parameters
    ----------
    rows : Rows, k trials
        With ``estimate`` and ``standard_error``.

    Returns
    -------
    Effects
        Shape (k,), scale of the estimate.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.positive(rows, "standard_error")
    return Effects.plain(rows["estimate"], rows["standard_error"] ** 2)


def from_log_estimate(rows: Rows) -> Effects:
    """Log ratio and its standard error as reported, in columns that say so.

    Parameters
    ----------
    rows : Rows, k trials
        With ``log_estimate`` and ``standard_error``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.positive(rows, "standard_error")
    return Effects.plain(rows["log_estimate"], rows["standard_error"] ** 2)


def ratio_from_p(rows: Rows) -> Effects:
    r"""Log ratio with :math:`SE = |\log(ratio)|/z` from a two-sided P value.

    Altman and Bland 2011, BMJ 343:d2090 (with the exact normal quantile).

    Parameters
    ----------
    rows : Rows, k trials
        With ``estimate`` (natural scale, not 1) and ``p_value``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.positive(rows, "estimate")
    probability(rows)
    for field in ("estimate", "p_value"):
        at_null = rows[field] == 1
        refuse(at_null, rows.labels, field, rows[field], "no effect: gives no SE", "an interval or events")
    estimate = np.log(rows["estimate"])
    return Effects.plain(estimate, (estimate / norm.isf(rows["p_value"] / 2)) ** 2)


def probability(rows: Rows) -> None:
    """Refuse a P value that is not above 0, or above 1.

    Parameters
    ----------
    rows : Rows, k trials
        With ``p_value``.

    Raises
    ------
    AnalysisError
        Naming the first faulty trial and the field.
    """
    p = rows["p_value"]
    refuse((p <= 0) | (p > 1), rows.labels, "p_value", p, "is no P value", "above 0 and at most 1")
