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
from treering.pooling.likelihood import Slope, slope
from treering.pooling.maximum import maximise
from treering.pooling.moments import Sums, apart, dot, sums, weigh
from treering.pooling.qroot import solve_q
from treering.pooling.result import FloatArray
from treering.terms import Tau2

AtZero = Sums | Slope
Estimator = Callable[[Batch, AtZero], FloatArray]


def _dersimonian_laird(batch: Batch, common: AtZero) -> FloatArray:
    w = weigh(batch.v, np.zeros(batch.k.size))
    scale = apart(w[0], w[1:].sum(axis=0), dot(w[1:], w[1:]), common.total)
    return (common.q - (batch.k - 1.0)) / scale


def _paule_mandel(batch: Batch, common: AtZero) -> FloatArray:
    return solve_q(batch, batch.k - 1.0, common, np.zeros(batch.k.size), common)


def _slope_at_zero(batch: Batch, common: AtZero, *, restricted: bool) -> Slope:
    return (
        common if isinstance(common, Slope) else slope(batch, np.zeros(batch.k.size), restricted=restricted)
    )


def _reml(batch: Batch, common: AtZero) -> FloatArray:
    return maximise(batch, _slope_at_zero(batch, common, restricted=True), restricted=True)


def _ml(batch: Batch, common: AtZero) -> FloatArray:
    return maximise(batch, _slope_at_zero(batch, common, restricted=False), restricted=False)


def _plain_squares(batch: Batch) -> FloatArray:
    """Sum of squares around the unweighted mean."""
    mean = batch.y.sum(axis=0) / batch.k
    residual = np.where(np.isfinite(batch.v), batch.y - mean, 0.0)
    return dot(residual, residual)


def _hedges(batch: Batch, common: AtZero) -> FloatArray:
    inner: FloatArray = np.where(np.isfinite(batch.v), batch.v, 0.0).sum(axis=0) / batch.k
    return _plain_squares(batch) / (batch.k - 1.0) - inner


def _sidik_jonkman(batch: Batch, common: AtZero) -> FloatArray:
    # Their weights 1 / (v / rough + 1) are rough / (v + rough): the estimate is rough * Q(rough) / (k - 1).
    rough = _plain_squares(batch) / batch.k
    return rough * sums(batch, rough).q / (batch.k - 1.0)


def _hunter_schmidt(batch: Batch, common: AtZero) -> FloatArray:
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


def read_at_zero(batch: Batch, method: Tau2) -> AtZero:
    """Make the sums at tau2 = 0, and with them, in the same sweep, what the method wants to know there.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    method : Tau2
        Estimator.

    Returns
    -------
    Sums or Slope
        Both have total, mean, q and a.
    """
    nought = np.zeros(batch.k.size)
    if method in (Tau2.REML, Tau2.ML):
        return slope(batch, nought, restricted=method is Tau2.REML)
    return sums(batch, nought)


def estimate_tau2(batch: Batch, common: AtZero, method: Tau2) -> FloatArray:
    """Between-trial variance of each synthesis.

    Parameters
    ----------
    batch : Batch
        Syntheses of at least two trials each, estimates centred near zero.
    common : Sums or Slope
        What `read_at_zero` gives for this method.
    method : Tau2
        Estimator.

    Returns
    -------
    ndarray, shape (g,)
        Tau2, never below zero.
    """
    return np.maximum(ESTIMATORS[method](batch, common), 0.0)
