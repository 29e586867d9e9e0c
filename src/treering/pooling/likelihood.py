"""Profile likelihoods of tau2 in the random-effects model: value, slope and curvature.

Full (ML; Hardy and Thompson 1996, Stat Med 15:619) and restricted (REML; Harville 1977, J Am Stat Assoc
72:320) likelihood, cited from memory. Twice the slope is A - B with A = sum w^2 (y - mu)^2 and B = trace P:
sum w (ML) or sum w - sum w^2 / sum w (REML).
"""

from __future__ import annotations

import numpy as np

from treering.pooling.batch import Batch
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


def slope_changes(now: Fit, *, restricted: bool) -> tuple[FloatArray, FloatArray]:
    """Return minus the derivatives of A and B in tau2; from dP/dt = -PP for the projection P.

    Parameters
    ----------
    now : Fit
        Sums at some tau2.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    tuple of ndarray, shape (g,)
        -A' = 2 y'PPPy and -B' = trace PP.
    """
    shift = dot(now.w, now.pull)
    bend = np.einsum("ij,ij,ij->j", now.w, now.pull, now.pull) - shift * shift / now.total
    square = dot(now.w, now.w)
    if not restricted:
        return 2.0 * bend, square
    cube = np.einsum("ij,ij,ij->j", now.w, now.w, now.w)
    ratio = square / now.total
    return 2.0 * bend, square - 2.0 * cube / now.total + ratio * ratio


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
