"""Conditional likelihood of a 2x2 table: the non-central hypergeometric distribution.

Given both totals and the number of events in the two arms together, the events of the intervention arm
follow Fisher's non-central hypergeometric distribution, which depends on the log odds ratio alone: the
trial's own intercept is gone (Fisher 1935; Stijnen, Hamza and Ozdemir 2010, Stat Med 29:3046, eq. 12).
A trial with no event at all, or with events in everyone, has one possible table only and so says nothing
about the odds ratio in this model.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import gammaln

from treering.pooling.quadrature import Array, Derivatives


def _log_choose(n: Array, r: Array) -> Array:
    """Log of n over r; -inf outside 0 <= r <= n."""
    inside = (r >= 0) & (r <= n)
    safe = np.where(inside, r, 0.0)
    value = gammaln(n + 1) - gammaln(safe + 1) - gammaln(n - safe + 1)
    return np.where(inside, value, -np.inf)


@dataclass(frozen=True, slots=True)
class ConditionalTables:
    """Trials prepared for the conditional likelihood.

    Attributes
    ----------
    shift : ndarray, shape (k,)
        Events of the intervention arm above the smallest possible number.
    log_base : ndarray, shape (k, s)
        Log weight of each possible table at odds ratio 1, padded with -inf to the longest support.
    steps : ndarray, shape (s,)
        0, 1, 2, ...: possible event numbers above the smallest.
    """

    shift: Array
    log_base: Array
    steps: Array

    def derivatives(self, theta: Array) -> Derivatives:
        """Log-likelihood, score and curvature at log odds ratios ``theta`` of shape (k, n, 1)."""
        exponent = self.log_base[:, None, :] + theta * self.steps
        top = exponent.max(axis=2, keepdims=True)
        mass = np.exp(exponent - top)
        total = mass.sum(axis=2)
        first = mass @ self.steps / total
        second = mass @ self.steps**2 / total
        observed = np.take_along_axis(self.log_base, self.shift[:, None].astype(np.int64), axis=1)
        value = observed + self.shift[:, None] * theta[..., 0] - top[..., 0] - np.log(total)
        gradient = self.shift[:, None] - first
        return value, gradient[..., None], -(second - first**2)[..., None, None]


def conditional_tables(
    events_1: npt.ArrayLike, total_1: npt.ArrayLike, events_2: npt.ArrayLike, total_2: npt.ArrayLike
) -> ConditionalTables:
    """Lay out the support of every trial's conditional distribution.

    Parameters
    ----------
    events_1, total_1, events_2, total_2 : array-like of int, shape (k,)
        Counts of the intervention arm (1) and the comparator arm (2).

    Returns
    -------
    ConditionalTables
        The prepared trials.
    """
    a, n1, c, n2 = (np.asarray(v, dtype=np.float64) for v in (events_1, total_1, events_2, total_2))
    t = a + c
    low, high = np.maximum(0.0, t - n2), np.minimum(n1, t)
    steps = np.arange(int((high - low).max(initial=0.0)) + 1, dtype=np.float64)
    possible = low[:, None] + steps
    log_base = _log_choose(n1[:, None], possible) + _log_choose(n2[:, None], t[:, None] - possible)
    # only differences matter; anchoring at the largest keeps big factorials out of the arithmetic
    log_base -= log_base.max(axis=1, keepdims=True)
    return ConditionalTables(shift=a - low, log_base=log_base, steps=steps)


def log_pmf(
    events_1: npt.ArrayLike,
    total_1: npt.ArrayLike,
    events_2: npt.ArrayLike,
    total_2: npt.ArrayLike,
    log_odds_ratio: npt.ArrayLike,
) -> Array:
    """Log probability of each 2x2 table given its margins.

    Parameters
    ----------
    events_1, total_1, events_2, total_2 : array-like of int, shape (k,)
        Counts of the intervention arm (1) and the comparator arm (2).
    log_odds_ratio : array-like, scalar or shape (k,)
        Log odds ratio of intervention against comparator.

    Returns
    -------
    ndarray, shape (k,)
        Log of Fisher's non-central hypergeometric probability.
    """
    tables = conditional_tables(
        np.atleast_1d(events_1), np.atleast_1d(total_1), np.atleast_1d(events_2), np.atleast_1d(total_2)
    )
    theta = np.broadcast_to(np.asarray(log_odds_ratio, dtype=np.float64), tables.shift.shape)
    return tables.derivatives(theta[:, None, None])[0][:, 0]
