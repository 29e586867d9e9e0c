"""Seven estimators of the between-trial variance tau2, each over a whole batch of syntheses.

DerSimonian and Laird 1986 (Control Clin Trials 7:177), Paule and Mandel 1982 (J Res Natl Bur Stand 87:377),
restricted and full maximum likelihood (see `maximum`), Hedges 1983 (Psychol Bull 93:388), Sidik and
Jonkman 2005 (Appl Stat 54:367), Hunter and Schmidt 1990. Cited from memory. A negative moment
estimate is cut off at zero.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from treering.pooling.batch import Batch
from treering.pooling.maximum import maximise
from treering.pooling.moments import Fit, dot, fit
from treering.pooling.qroot import solve_q
from treering.pooling.result import FloatArray
from treering.terms import Tau2

Estimator = Callable[[Batch, Fit], FloatArray]


def _dersimonian_laird(batch: Batch, common: Fit) -> FloatArray:
    scale = common.total - dot(common.w, common.w) / common.total
    return (common.q - (batch.k - 1.0)) / scale


def _paule_mandel(batch: Batch, common: Fit) -> FloatArray:
    return solve_q(batch, batch.k - 1.0, common, np.zeros(batch.k.size), common)


def _reml(batch: Batch, common: Fit) -> FloatArray:
    return maximise(batch, common, restricted=True)


def _ml(batch: Batch, common: Fit) -> FloatArray:
    return maximise(batch, common, restricted=False)


def _plain_squares(batch: Batch) -> FloatArray:
    """Sum of squares around the unweighted mean."""
    mean = batch.y.sum(axis=0) / batch.k
    residual = np.where(np.isfinite(batch.v), batch.y - mean, 0.0)
    return dot(residual, residual)


def _hedges(batch: Batch, common: Fit) -> FloatArray:
    inner: FloatArray = np.where(np.isfinite(batch.v), batch.v, 0.0).sum(axis=0) / batch.k
    return _plain_squares(batch) / (batch.k - 1.0) - inner


def _sidik_jonkman(batch: Batch, common: Fit) -> FloatArray:
    # Their weights 1 / (v / rough + 1) are rough / (v + rough): the estimate is rough * Q(rough) / (k - 1).
    rough = _plain_squares(batch) / batch.k
    return rough * fit(batch, rough).q / (batch.k - 1.0)


def _hunter_schmidt(batch: Batch, common: Fit) -> FloatArray:
    return (common.q - batch.k) / common.total


ESTIMATORS: Mapping[Tau2, Estimator] = {
    Tau2.DERSIMONIAN_LAIRD: _dersimonian_laird,
    Tau2.PAULE_MANDEL: _paule_mandel,
    Tau2.REML: _reml,
    Tau2.ML: _ml,
    Tau2.HEDGES: _hedges,
    Tau2.SIDIK_JONKMAN: _sidik_jonkman,
    Tau2.HUNTER_SCHMIDT: _hunter_schmidt,
}


def estimate_tau2(batch: Batch, common: Fit, method: Tau2) -> FloatArray:
    """Between-trial variance of each synthesis.

    Parameters
    ----------
    batch : Batch
        Syntheses of at least two trials each, estimates centred near zero.
    common : Fit
        Sums at tau2 = 0.
    method : Tau2
        Estimator.

    Returns
    -------
    ndarray, shape (g,)
        Tau2, never below zero.
    """
    return np.maximum(ESTIMATORS[method](batch, common), 0.0)
