"""From sums to statements: tests, intervals, heterogeneity and prediction.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from scipy import special

from treering.pooling.result import FloatArray
from treering.pooling.tails import chi2_tail, t_tail


class Inference(NamedTuple):
    """Interval, two-sided P value and its signed normal quantile, one of each for a synthesis."""

    low: FloatArray
    high: FloatArray
    z: FloatArray
    p: FloatArray


def normal_test(estimate: FloatArray, error: FloatArray, level: float) -> Inference:
    """Wald interval and test: z is estimate / standard error."""
    z = estimate / error
    half = special.ndtri(0.5 + level / 2.0) * error
    return Inference(estimate - half, estimate + half, z, 2.0 * special.ndtr(-np.abs(z)))


def t_test(estimate: FloatArray, error: FloatArray, df: FloatArray, level: float) -> Inference:
    """Interval and test on Student's t; z is the signed normal quantile of the t test's P value.

    A standard error of zero (all estimates the same) leaves z and p not estimable (NaN).
    """
    half = t_quantile(df, 0.5 + level / 2.0) * error
    t = np.divide(estimate, error, out=np.full_like(estimate, np.nan), where=error > 0.0)
    tail = t_tail(df, t)
    z = np.copysign(-special.ndtri(tail), t)
    far = tail < 1e-300
    if far.any():
        z[far] = np.copysign(-special.ndtri_exp(log_t_tail(df[far], t[far])), t[far])
    return Inference(estimate - half, estimate + half, z, 2.0 * tail)


def log_t_tail(df: FloatArray, t: FloatArray) -> FloatArray:
    """Logarithm of the upper tail of Student's t, also where the tail itself underflows.

    The tail is half the incomplete beta function at x = df / (df + t^2) with a = df / 2, b = 1 / 2; its
    series is x^a (1-x)^b / (a B(a, b)) 2F1(a + b, 1; a + 1; x) (Abramowitz and Stegun 26.5.23, 15.3).
    """
    a = df / 2.0
    x = df / (df + t * t)
    log_series = np.log(special.hyp2f1(a + 0.5, 1.0, a + 1.0, x))
    out: FloatArray = (
        np.log(0.5) + a * np.log(x) + 0.5 * np.log1p(-x) - np.log(a) - special.betaln(a, 0.5) + log_series
    )
    return out


def t_quantile(df: FloatArray, probability: float) -> FloatArray:
    """Quantiles of Student's t, computed once for each distinct number of degrees of freedom."""
    return _for_distinct(df, lambda d: np.asarray(special.stdtrit(d, probability), dtype=np.float64))


def chi2_quantile(df: FloatArray, upper_tail: float) -> FloatArray:
    """Value that chi-square exceeds with this probability, once for each distinct df."""
    return _for_distinct(df, lambda d: np.asarray(special.chdtri(d, upper_tail), dtype=np.float64))


def _for_distinct(df: FloatArray, function: Callable[[FloatArray], FloatArray]) -> FloatArray:
    if df.size and (df == df[0]).all():
        return np.full_like(df, function(df[:1])[0])
    values, place = np.unique(df, return_inverse=True)
    return function(values)[place]


def heterogeneity_p(q: float | FloatArray, df: float | FloatArray) -> FloatArray:
    """P value of Cochran's Q.

    Parameters
    ----------
    q : float or ndarray
        Cochran's Q.
    df : float or ndarray
        Its degrees of freedom; the result is NaN where they are zero.

    Returns
    -------
    ndarray
        Upper tail of chi-square.
    """
    freedom, spread = (np.atleast_1d(np.asarray(number, dtype=np.float64)) for number in (df, q))
    tail = np.where(freedom > 0.0, chi2_tail(np.maximum(freedom, 1.0), spread), np.nan)
    return tail.reshape(np.shape(q))


def i2_interval(q: FloatArray, df: FloatArray, level: float) -> tuple[FloatArray, FloatArray]:
    """Inference-based interval of I2 (Higgins and Thompson 2002, Stat Med 21:1539; from memory).

    ln H has standard error (ln Q - ln df) / (2 (sqrt(2 Q) - sqrt(2 k - 3))) for Q > k, otherwise
    sqrt(1 / (2 (k - 2)) (1 - 1 / (3 (k - 2)^2))); I2 = (H^2 - 1) / H^2, H cut off at one.

    Parameters
    ----------
    q, df : ndarray, shape (g,)
        Cochran's Q and its degrees of freedom.
    level : float
        Confidence level.

    Returns
    -------
    tuple of ndarray
        Lower and upper limit as fractions; NaN for fewer than two trials, and for two trials with Q <= 2,
        where the formula has no value.
    """
    k = df + 1.0
    large = (q > k) & (df > 0.0)
    big_q, big_k = np.where(large, q, 4.0), np.where(large, k, 2.0)
    error_large = (np.log(big_q) - np.log(big_k - 1.0)) / (
        2.0 * (np.sqrt(2.0 * big_q) - np.sqrt(2.0 * big_k - 3.0))
    )
    two_off = np.where(k > 2.0, k - 2.0, np.nan)
    error_small = np.sqrt((1.0 - 1.0 / (3.0 * two_off * two_off)) / (2.0 * two_off))
    half = special.ndtri(0.5 + level / 2.0) * np.where(large, error_large, error_small)
    log_h = 0.5 * np.log(np.where(df > 0.0, np.maximum(q, df) / np.maximum(df, 1.0), 1.0))
    low, high = (1.0 - np.exp(-2.0 * np.maximum(log_h + side, 0.0)) for side in (-half, half))
    return np.where(df > 0.0, low, np.nan), np.where(df > 0.0, high, np.nan)


def prediction(
    estimate: FloatArray, variance: FloatArray, tau2: FloatArray, df: FloatArray, level: float
) -> tuple[FloatArray, FloatArray]:
    """Prediction interval: estimate -/+ t sqrt(tau2 + variance) (Higgins, Thompson and Spiegelhalter 2009).

    Parameters
    ----------
    estimate, variance, tau2 : ndarray, shape (g,)
        Pooled effect, its ordinary (Wald) variance, between-trial variance. The ordinary variance is the
        published formula and does not let the choice of test move the interval.
    df : ndarray, shape (g,)
        Degrees of freedom; NaN comes back where they are below one.
    level : float
        Level.

    Returns
    -------
    tuple of ndarray
        Lower and upper limit.
    """
    usable = np.where(df >= 1.0, df, 1.0)
    half = t_quantile(usable, 0.5 + level / 2.0) * np.sqrt(tau2 + variance)
    half = np.where(df >= 1.0, half, np.nan)
    return estimate - half, estimate + half
