"""Beta-binomial model of two arms over many trials.

The events of one arm of one trial are beta-binomial: the arm's risk varies from trial to trial as a beta
distribution with a mean that depends on the arm and with one intra-class correlation for both arms
(Kuss 2015, Stat Med 34:1097). There is no trial intercept to be estimated and none to be conditioned on,
so a trial without any event counts in full. The price: both arms of a trial are treated as independent,
and the comparison within trials is given up; the result is best read beside a model that keeps it.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np
from scipy.special import expit, gammaln, psi

from treering.pooling.binomial import Arms
from treering.pooling.likelihood_fit import Problem
from treering.pooling.quadrature import Array

_LARGE = 1e4


def _rising(a: Array, n: Array) -> Array:
    """Log of a (a+1) ... (a+n-1), without cancellation at large ``a`` (Stirling series)."""
    small = np.minimum(a, _LARGE)
    exact = gammaln(small + n) - gammaln(small)
    big = np.maximum(a, _LARGE)
    series = (big - 0.5) * np.log1p(n / big) + n * np.log(big + n) - n
    series += (1 / (big + n) - 1 / big) / 12
    return np.where(a > _LARGE, series, exact)


def _rising_slope(a: Array, n: Array) -> Array:
    """Return psi(a + n) - psi(a), the derivative of ``_rising`` in ``a``."""
    small = np.minimum(a, _LARGE)
    exact = psi(small + n) - psi(small)
    big = np.maximum(a, _LARGE)
    series = np.log1p(n / big) - (1 / (big + n) - 1 / big) / 2 - (1 / (big + n) ** 2 - 1 / big**2) / 12
    return np.where(a > _LARGE, series, exact)


def _one_arm(events: Array, total: Array, eta: float, s: float) -> tuple[float, float, float]:
    """Log-likelihood of one arm over trials, its slope in the logit ``eta`` and in log ``s``.

    ``s`` is the precision of the beta distribution; the correlation is 1 / (1 + s).
    """
    p = float(expit(eta))
    alpha, beta, precision = (np.full(events.shape, v) for v in (p * s, (1 - p) * s, s))
    rest = total - events
    value = _rising(alpha, events) + _rising(beta, rest) - _rising(precision, total)
    da, db = _rising_slope(alpha, events), _rising_slope(beta, rest)
    in_p = s * np.sum(da - db)
    in_s = np.sum(p * da + (1 - p) * db - _rising_slope(precision, total))
    return float(np.sum(value)), float(in_p * p * (1 - p)), float(in_s * s)


def _binomial_arm(events: Array, total: Array, eta: float) -> tuple[float, float]:
    """Log-likelihood and slope of one arm when the risk does not vary over trials (correlation 0)."""
    value = np.sum(events) * eta - np.sum(total) * np.logaddexp(0.0, eta)
    return float(value), float(np.sum(events) - np.sum(total) * expit(eta))


def problem(arms: Arms, *, correlated: bool) -> Problem:
    """Set up the likelihood in (logit comparator risk, log odds ratio[, log precision]).

    Parameters
    ----------
    arms : Arms
        All trials.
    correlated : bool
        False fixes the correlation at 0 (two pooled binomials); the third parameter is then left out.

    Returns
    -------
    Problem
        For ``likelihood_fit.maximise``. Binomial coefficients are left out of the likelihood.
    """

    def objective(x: Array) -> tuple[float, Array]:
        if not correlated:
            v1, g1 = _binomial_arm(arms.events_1, arms.total_1, x[0] + x[1])
            v2, g2 = _binomial_arm(arms.events_2, arms.total_2, x[0])
            return v1 + v2, np.array([g1 + g2, g1])
        s = float(np.exp(x[2]))
        v1, g1, s1 = _one_arm(arms.events_1, arms.total_1, float(x[0] + x[1]), s)
        v2, g2, s2 = _one_arm(arms.events_2, arms.total_2, float(x[0]), s)
        return v1 + v2, np.array([g1 + g2, g1, s1 + s2])

    eta1, eta2 = (
        np.log(e.sum() / (n - e).sum())
        for e, n in ((arms.events_1, arms.total_1), (arms.events_2, arms.total_2))
    )
    if not correlated:
        start = np.array([eta2, eta1 - eta2])
        return Problem(objective, (start,), np.full(2, -15.0), np.full(2, 15.0), ())
    starts = tuple(np.array([eta2, eta1 - eta2, log_s]) for log_s in (2.0, 5.0))
    return Problem(
        objective, starts, np.array([-15.0, -15.0, np.log(1e-3)]), np.array([15.0, 15.0, np.log(1e9)]), ()
    )
