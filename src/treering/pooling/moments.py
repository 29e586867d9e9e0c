"""Weighted sums that all estimators share: the generalised Q and what comes with it.

With weights w = 1 / (v + t) and mu their weighted mean, the generalised Q is Q(t) = sum w (y - mu)^2
(DerSimonian and Kacker 2007, Contemp Clin Trials 28:105, eq. 6). Q(0) is Cochran's Q.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from treering.pooling.batch import Batch, IntArray
from treering.pooling.result import FloatArray


class Fit(NamedTuple):
    """Weights at one tau2 and the sums made with them.

    Attributes
    ----------
    w : ndarray, shape (n, g)
        Weights 1 / (v + tau2).
    total : ndarray, shape (g,)
        Sum of weights.
    mean : ndarray, shape (g,)
        Weighted mean.
    pull : ndarray, shape (n, g)
        w (y - mean), each trial's pull on the mean.
    q : ndarray, shape (g,)
        Generalised Q.
    """

    w: FloatArray
    total: FloatArray
    mean: FloatArray
    pull: FloatArray
    q: FloatArray

    def columns(self, which: IntArray) -> Fit:
        """Take the syntheses at these positions."""
        return Fit(*(field.take(which, axis=-1) for field in self))


def dot(a: FloatArray, b: FloatArray) -> FloatArray:
    """Sum over trials of the products, one number for each synthesis."""
    out: FloatArray = np.einsum("ij,ij->j", a, b)
    return out


def fit(batch: Batch, tau2: FloatArray) -> Fit:
    """Weighted mean and generalised Q of each synthesis at its tau2.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    tau2 : ndarray, shape (g,)
        Between-trial variance.

    Returns
    -------
    Fit
        Weights and sums.
    """
    w = batch.v + tau2
    np.reciprocal(w, out=w)
    total = w.sum(axis=0)
    mean = dot(w, batch.y) / total
    residual = batch.y - mean
    pull = w * residual
    return Fit(w, total, mean, pull, dot(pull, residual))
