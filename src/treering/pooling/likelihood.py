"""Profile likelihoods of tau2 in the random-effects model: value, slope and curvature.

Full (ML; Hardy and Thompson 1996, Stat Med 15:619) and restricted (REML; Harville 1977, J Am Stat Assoc
72:320) likelihood, cited from memory. Twice the slope is A - B with A = sum w^2 (y - mu)^2 and B = trace P:
sum w (ML) or sum w - sum w^2 / sum w (REML).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from treering.pooling.batch import Batch, IntArray
from treering.pooling.moments import Fit, dot, fit
from treering.pooling.result import FloatArray


def slope_terms(now: Fit, *, restricted: bool) -> tuple[FloatArray, FloatArray]:
    """Return the terms A and B of the slope; the likelihood rises where A > B.

    Parameters
    ----------
    now : Fit
        Sums at some tau2.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    tuple of ndarray, shape (g,)
        A and B, both above zero unless all estimates are the same.
    """
    expected = now.total - dot(now.w, now.w) / now.total if restricted else now.total
    return dot(now.pull, now.pull), expected


class Slope(NamedTuple):
    """Twice the slope of the likelihood is a - b; fall_a = -a' and fall_b = -b' in tau2, shape (g,) each."""

    a: FloatArray
    b: FloatArray
    fall_a: FloatArray
    fall_b: FloatArray

    def columns(self, which: IntArray) -> Slope:
        """Take the syntheses at these positions."""
        return Slope(*(field[which] for field in self))


def slope(now: Fit, *, restricted: bool) -> Slope:
    """Return the terms of the slope and how fast they fall; from dP/dt = -PP for the projection P.

    Parameters
    ----------
    now : Fit
        Sums at some tau2.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    Slope
        A = y'PPy, B (see the module's text), -A' = 2 y'PPPy, and -B' = trace PP, or sum w^2 for ML.
    """
    a, square = dot(now.pull, now.pull), dot(now.w, now.w)
    inner = now.w * now.pull
    shift = inner.sum(axis=0)
    fall_a = 2.0 * (dot(inner, now.pull) - shift * shift / now.total)
    if not restricted:
        return Slope(a, now.total, fall_a, square)
    cube, ratio = dot(np.multiply(now.w, now.w, out=inner), now.w), square / now.total
    return Slope(a, now.total - ratio, fall_a, square - 2.0 * cube / now.total + ratio * ratio)


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
    now = fit(batch, tau2)
    spread = np.where(now.w > 0.0, batch.v + tau2, 1.0)
    minus_twice = np.log(spread).sum(axis=0) + now.q
    out: FloatArray = -0.5 * (minus_twice + np.log(now.total) if restricted else minus_twice)
    return out
