"""Effects of trials with continuous outcomes, on the analysis scale.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np
from scipy.special import gammaln

from treering.effects import checks, columns
from treering.effects.rows import Effects, FloatArray, Rows, refuse

_SERIES_FROM = 200.0


def _arms(rows: Rows) -> tuple[FloatArray, ...]:
    fields = ("mean", "sd", "total")
    return tuple(rows[f"{arm}_{field}"] for arm in checks.ARMS for field in fields)


def mean_difference(rows: Rows) -> Effects:
    r"""Mean difference with separate variances.

    :math:`\bar x_1 - \bar x_2`, variance :math:`s_1^2/n_1 + s_2^2/n_2` (Cochrane Handbook, section 10.5.2).

    Parameters
    ----------
    rows : Rows, k trials
        With mean, SD and total of both arms.

    Returns
    -------
    Effects
        Shape (k,), unit of the measurement.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.means(rows)
    m1, s1, n1, m2, s2, n2 = _arms(rows)
    return Effects.plain(m1 - m2, s1**2 / n1 + s2**2 / n2)


def small_sample_factor(degrees_of_freedom: FloatArray | float) -> FloatArray:
    r"""Exact factor J that removes the small-sample bias of a standardized mean difference.

    :math:`J(m) = \Gamma(m/2) / \{\sqrt{m/2}\,\Gamma((m-1)/2)\}` (Hedges 1981, J Educ Stat 6:107,
    equation 6e).
    From 200 degrees of freedom the asymptotic series in 1/m takes over, because the difference of two large
    log-gamma values loses digits.

    Parameters
    ----------
    degrees_of_freedom : array_like
        m, above 1; for two arms n1 + n2 - 2.

    Returns
    -------
    ndarray
        J, between 0 and 1.

    Raises
    ------
    AnalysisError
        If degrees of freedom are not finite and above 1.
    """
    m = columns.figures("degrees_of_freedom", degrees_of_freedom, above=1)
    x = 1 / m
    tail = x * (59 / 2048 + x * (483 / 8192 - x * 2323 / 65536))
    series = 1 - x * (3 / 4 + x * (7 / 32 + x * (9 / 128 - tail)))
    few = np.minimum(m, _SERIES_FROM)
    exact = np.exp(gammaln(few / 2) - gammaln((few - 1) / 2)) / np.sqrt(few / 2)
    return np.asarray(np.where(m >= _SERIES_FROM, series, exact))


def standardized_mean_difference(rows: Rows) -> Effects:
    r"""Hedges' g with the exact small-sample factor.

    With d the mean difference over the pooled SD, :math:`g = J d` and variance
    :math:`J^2 \{(n_1+n_2)/(n_1 n_2) + d^2/(2(n_1+n_2))\}` (Hedges 1981; variance as in Borenstein, Hedges,
    Higgins and Rothstein 2009, equations 4.20 and 4.24).

    Parameters
    ----------
    rows : Rows, k trials
        With mean, SD and total of both arms.

    Returns
    -------
    Effects
        Shape (k,), in SDs.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.means(rows)
    m1, s1, n1, m2, s2, n2 = _arms(rows)
    freedom = n1 + n2 - 2
    too_few = freedom <= 1
    refuse(too_few, rows.labels, "intervention_total", n1, "leaves one degree of freedom", "more people")
    pooled_sd = np.sqrt(((n1 - 1) * s1**2 + (n2 - 1) * s2**2) / freedom)
    d = (m1 - m2) / pooled_sd
    factor = small_sample_factor(freedom)
    return Effects.plain(factor * d, factor**2 * ((n1 + n2) / (n1 * n2) + d**2 / (2 * (n1 + n2))))


def log_ratio_of_means(rows: Rows) -> Effects:
    r"""Log ratio of two means above zero.

    :math:`\log(\bar x_1/\bar x_2)`, variance :math:`s_1^2/(n_1 \bar x_1^2) + s_2^2/(n_2 \bar x_2^2)` (Hedges,
    Gurevitch and Curtis 1999, Ecology 80:1150, equation 1).

    Parameters
    ----------
    rows : Rows, k trials
        With mean, SD and total of both arms, means above zero.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.means(rows)
    checks.positive(rows, "intervention_mean", "comparator_mean")
    m1, s1, n1, m2, s2, n2 = _arms(rows)
    return Effects.plain(np.log(m1) - np.log(m2), s1**2 / (n1 * m1**2) + s2**2 / (n2 * m2**2))
