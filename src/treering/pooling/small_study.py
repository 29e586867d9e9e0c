"""Regressions of effect on precision: whether small trials tell another story than large ones.

Readers take these tests with ten or more trials only; fewer are computed all the same and marked
(`few_trials`), so that the report can hold them back.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy import special, stats

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike
from treering.pooling.checks import check_effects
from treering.pooling.counts import deviations, read_counts
from treering.pooling.moderated import ROUNDING
from treering.pooling.result import FloatArray

FEW_TRIALS = 10
"""Below this number a test for small-study effects is marked (Sterne et al. 2011, from memory)."""


@dataclass(frozen=True)
class RegressionTest:
    """A weighted straight line whose intercept or slope is the test.

    Attributes
    ----------
    intercept, slope : float
        Both coefficients.
    standard_error, t, p : float
        Of the coefficient named in `tested`; two-sided P value.
    df : int
        k - 2.
    k : int
        Trials used.
    tested : {"intercept", "slope"}
        Which coefficient is the test.
    few_trials : bool
        Fewer than ten trials: not to be read as a test.
    left_out : int
        Trials that the regression cannot use (zero cells).
    """

    intercept: float
    slope: float
    standard_error: float
    t: float
    p: float
    df: int
    k: int
    tested: str
    few_trials: bool
    left_out: int


def egger(estimates: ArrayLike, variances: ArrayLike) -> RegressionTest:
    """Regress y / se on 1 / se; the intercept is the test (Egger et al. 1997, BMJ 315:629, from memory).

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        At least three trials.

    Returns
    -------
    RegressionTest
        With `tested` "intercept".

    Raises
    ------
    AnalysisError
        Bad input as for `pool`, fewer than three trials, or all trials equally precise.
    """
    y, v = check_effects(estimates, variances)
    error = np.sqrt(v)
    return _line(1.0 / error, y / error, np.ones(y.size), "intercept", 0)


def harbord(table: pd.DataFrame) -> RegressionTest:
    """Regress Z / sqrt(V) on sqrt(V); the intercept is the test (Harbord et al. 2006, from memory).

    Z is observed minus expected events, V their hypergeometric variance (score and information of the log
    odds ratio at zero). Trials with V = 0 are left out.

    Parameters
    ----------
    table : DataFrame, k rows
        The four columns of counts.

    Returns
    -------
    RegressionTest
        With `tested` "intercept".

    Raises
    ------
    AnalysisError
        A count that cannot be right, fewer than three usable trials, or all equally precise.
    """
    score, information = deviations(table)
    used = information > 0.0
    root = np.sqrt(information[used])
    return _line(root, score[used] / root, np.ones(root.size), "intercept", int((~used).sum()))


def peters(table: pd.DataFrame) -> RegressionTest:
    """Regress the log odds ratio on 1 / n; the slope is the test (Peters et al. 2006, from memory).

    Weights are m (n - m) / n with m the events of both arms. Trials with a zero cell have no log odds ratio
    and are left out; nothing is added to their cells.

    Parameters
    ----------
    table : DataFrame, k rows
        The four columns of counts.

    Returns
    -------
    RegressionTest
        With `tested` "slope".

    Raises
    ------
    AnalysisError
        A count that cannot be right, fewer than three usable trials, or all of one size.
    """
    x = read_counts(table)
    used = (x.a > 0) & (x.b > 0) & (x.c > 0) & (x.d > 0)
    a, b, c, d = (cell[used] for cell in x)
    n, events = a + b + c + d, a + c
    return _line(1.0 / n, np.log(a * d / (b * c)), events * (n - events) / n, "slope", int((~used).sum()))


def _line(x: FloatArray, y: FloatArray, w: FloatArray, tested: str, left_out: int) -> RegressionTest:
    k = x.size
    if k < 3:
        raise AnalysisError("A line needs three or more usable trials.", found=k, expected="three or more")
    centre = float((w * x).sum() / w.sum())
    spread = float((w * (x - centre) ** 2).sum())
    if not spread > 1e-24 * float((w * x * x).sum()):
        raise AnalysisError("All trials have the same precision: no line can be drawn through them.")
    mean = float((w * y).sum() / w.sum())
    slope = float((w * (x - centre) * y).sum()) / spread
    residual = y - mean - slope * (x - centre)
    left = float((w * residual**2).sum())
    if not left > ROUNDING * float((w * y * y).sum()):
        raise AnalysisError("All trials lie exactly on one line: its test has no standard error.")
    scale = left / (k - 2)
    intercept = mean - slope * centre
    on_intercept = tested == "intercept"
    unit = 1.0 / float(w.sum()) + centre**2 / spread if on_intercept else 1.0 / spread
    error = float(np.sqrt(scale * unit))
    t = (intercept if on_intercept else slope) / error
    p = 2.0 * float(special.stdtr(k - 2, -abs(t)))
    return RegressionTest(intercept, slope, error, t, p, k - 2, k, tested, k < FEW_TRIALS, left_out)


@dataclass(frozen=True)
class RankTest:
    """Kendall's tau between standardized effect and variance, with its two-sided P value."""

    tau: float
    p: float
    k: int
    few_trials: bool


def rank_correlation(estimates: ArrayLike, variances: ArrayLike) -> RankTest:
    """Rank correlation of effect and variance (Begg and Mazumdar 1994, Biometrics 50:1088; from memory).

    Effects are standardized as (y - mu) / sqrt(v - 1 / sum(1 / v)), mu the common-effect mean.

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        At least three trials.

    Returns
    -------
    RankTest
        Kendall's tau; P exact without ties in small sets, otherwise normal.

    Raises
    ------
    AnalysisError
        Bad input as for `pool`, fewer than three trials, or all variances (or effects) the same.
    """
    y, v = check_effects(estimates, variances)
    if y.size < 3:
        raise AnalysisError("A rank correlation needs three or more trials.", found=int(y.size))
    w = 1.0 / v
    standardized = (y - (w * y).sum() / w.sum()) / np.sqrt(v - 1.0 / w.sum())
    if np.ptp(v) == 0.0 or np.ptp(y) == 0.0:
        raise AnalysisError("All variances or all effects are the same: there is nothing to rank.")
    result = stats.kendalltau(standardized, v)
    return RankTest(float(result.statistic), float(result.pvalue), int(y.size), y.size < FEW_TRIALS)
