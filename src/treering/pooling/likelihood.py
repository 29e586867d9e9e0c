"""Profile likelihoods of tau2 in the random-effects model: value, slope and curvature.

Full (ML; Hardy and Thompson 1996, Stat Med 15:619) and restricted (REML; Harville 1977, J Am Stat Assoc
72:320) likelihood, cited from memory. Twice the slope is A - B with A = sum w^2 (y - mu)^2 and B = trace P:
sum w (ML) or sum w - sum w^2 / sum w (REML).

Syntheses come in as `moments.centre` leaves them: digits are lost where the mean is far from zero.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from treering.pooling.batch import Batch, IntArray
from treering.pooling.moments import Terms, apart, dot, read, weigh
from treering.pooling.result import FloatArray


class Slope(NamedTuple):
    """Twice the slope of a likelihood is a - b, at one tau2; shape (g,) each.

    Attributes
    ----------
    total, mean, q, a : ndarray
        As in `Sums`; a is the first term of the slope.
    b : ndarray
        The second term.
    fall_a, fall_b : ndarray
        -da/dt and -db/dt.
    """

    total: FloatArray
    mean: FloatArray
    q: FloatArray
    a: FloatArray
    b: FloatArray
    fall_a: FloatArray
    fall_b: FloatArray

    def columns(self, which: IntArray) -> Slope:
        """Take the syntheses at these positions."""
        return Slope(*(term[which] for term in self))


def slope(batch: Batch, tau2: FloatArray, *, restricted: bool, owner: IntArray | None = None) -> Slope:
    """Return the terms of the slope and how fast they fall; from dP/dt = -PP for the projection P.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    tau2 : ndarray, shape (g,)
        Between-trial variances.
    restricted : bool
        True for REML, False for ML.
    owner : ndarray of int, shape (g,), optional
        As in `moments.read`.

    Returns
    -------
    Slope
        A = y'PPy, B (see the module's text), -A' = 2 y'PPPy, and -B' = trace PP, or sum w^2 for ML.
    """
    return Slope(*read(_restricted_slope if restricted else _full_slope, batch, tau2, owner))


def _full_slope(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    (total, mean, q, a, fall_a), first, _, square, _ = _moments(y, v, tau2)
    return total, mean, q, a, total, fall_a, first * first + square


def _restricted_slope(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    (total, mean, q, a, fall_a), first, rest, square, cube = _moments(y, v, tau2)
    share, other = first / total, rest / total
    mixed, cubes = other * square, cube / total
    # The trace of PP, multiplied out and sorted by powers of the first weight: its fourth power, which would
    # drown all else where it is by far the largest, falls out.
    fall_b = share * (share * (rest * rest + 3.0 * square) + 2.0 * (mixed - cubes)) + (
        other * (mixed - 2.0 * cubes) + (square / total) ** 2
    )
    return total, mean, q, a, apart(first, rest, square, total), fall_a, fall_b


def _moments(
    y: FloatArray, v: FloatArray, tau2: FloatArray
) -> tuple[Terms, FloatArray, FloatArray, FloatArray, FloatArray]:
    """Total, mean, Q, A and -A', and the first weight with the other weights' sums of w, w^2 and w^3.

    All from sums of w^i y^j. With p the first weight times the distance of the mean from the first trial, and
    T and U the other trials' sums of w^2 (y - mu) and w^3 (y - mu)^2, -A' / 2 is
    U + (w p^2 R + 2 w p T - T^2) / sum w, w the first weight and R the others' sum.
    """
    w = weigh(v, tau2)
    wy, ww = w * y, w * w
    first, others, wy1 = w[0], w[1:], wy[1:]
    rest, pull, square = others.sum(axis=0), wy.sum(axis=0), ww[1:].sum(axis=0)
    total = first + rest
    cube, wwy, wwwy = dot(ww[1:], others), dot(others, wy1), dot(ww[1:], wy1)
    mean = pull / total
    q = dot(wy, y) - pull * mean
    wwyy = np.multiply(wy1, wy1, out=ww[1:])
    p = first * (mean - y[0])
    a = p * p + (wwyy.sum(axis=0) - mean * (2.0 * wwy - mean * square))
    shift = wwy - mean * square
    apart_a = (first / total) * p * (p * rest + 2.0 * shift) - shift * (shift / total)
    fall_a = 2.0 * (dot(wwyy, others) - mean * (2.0 * wwwy - mean * cube) + apart_a)
    return (total, mean, q, a, fall_a), first, rest, square, cube


def slope_terms(
    batch: Batch, tau2: FloatArray, *, restricted: bool, owner: IntArray | None = None
) -> tuple[FloatArray, FloatArray]:
    """Return the terms A and B of the slope; the likelihood rises where A > B.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    tau2 : ndarray, shape (g,)
        Between-trial variances.
    restricted : bool
        True for REML, False for ML.
    owner : ndarray of int, shape (g,), optional
        As in `moments.read`.

    Returns
    -------
    tuple of ndarray, shape (g,)
        A and B, both above zero unless all estimates are the same.
    """
    a, b = read(_restricted_terms if restricted else _full_terms, batch, tau2, owner)
    return a, b


def _full_terms(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    a, total, *_ = _terms(y, v, tau2)
    return a, total


def _restricted_terms(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    a, total, first, rest, square = _terms(y, v, tau2)
    return a, apart(first, rest, square, total)


def _terms(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    """Return A, sum w, and the first weight with the other weights' sums of w and w^2."""
    w = weigh(v, tau2)
    wy = w * y
    first, others, wy1 = w[0], w[1:], wy[1:]
    rest, square = others.sum(axis=0), dot(others, others)
    total = first + rest
    mean = wy.sum(axis=0) / total
    p = first * (mean - y[0])
    a = p * p + (dot(wy1, wy1) - mean * (2.0 * dot(others, wy1) - mean * square))
    return a, total, first, rest, square


def log_likelihood(batch: Batch, tau2: FloatArray, *, restricted: bool) -> FloatArray:
    """Profile (restricted) log-likelihood without its constant.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    tau2 : ndarray, shape (g,)
        Between-trial variances.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Log-likelihoods; their differences are those of the full ones.
    """
    logs, q, total = read(_log_terms, batch, tau2)
    minus_twice = logs + q
    out: FloatArray = -0.5 * (minus_twice + np.log(total) if restricted else minus_twice)
    return out


def _log_terms(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    w = weigh(v, tau2)
    wy = w * y
    total, pull = w.sum(axis=0), wy.sum(axis=0)
    spread = np.where(w > 0.0, v + tau2, 1.0)
    return np.log(spread).sum(axis=0), dot(wy, y) - pull * pull / total, total
