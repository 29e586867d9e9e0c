"""Conditional likelihood of a 2x2 table: the non-central hypergeometric distribution.

Given both totals and the number of events in the two arms together, the events of the intervention arm
follow Fisher's non-central hypergeometric distribution, which depends on the log odds ratio alone: the
trial's own intercept is gone (Fisher 1935; Stijnen, Hamza and Ozdemir 2010, Stat Med 29:3046, eq. 12).
A trial with no event at all, or with events in everyone, has one possible table only and so says nothing
about the odds ratio in this model.

A mega-trial has tens of thousands of possible tables, of which few matter at any one odds ratio. Sums then
run over a window around the most likely table: the number of events is distributed as a sum of independent
yes-or-no variables, as many as there are steps in the support (Harkness 1965, Ann Math Statist 36:938), so
that Hoeffding's inequality (1963, J Am Stat Assoc 58:13) bounds what lies outside.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import gammaln

from treering.pooling.quadrature import Array, Derivatives

#: Half a window in roots of the support's steps: 2 exp(-2 * 5^2) is below 1e-21 of the total.
_REACH = 5.0


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
    falls : ndarray, shape (k, s - 1)
        How much the log weight falls from each step to the next, increasing; infinite beyond the support.
    """

    shift: Array
    log_base: Array
    steps: Array
    falls: Array

    def _window(self, theta: Array) -> tuple[Array, Array]:
        """Log weights (k, n, w) and first step (k, n, 1) of the possible tables that matter at ``theta``."""
        half = int(_REACH * np.sqrt(self.steps.size)) + 2
        width = 2 * half + 1
        if self.steps.size <= 2 * width:
            return self.log_base[:, None, :], np.zeros((1, 1, 1))
        # log weights are concave in the step: they climb while theta exceeds the fall
        peak = np.stack([np.searchsorted(row, at) for row, at in zip(self.falls, theta[..., 0], strict=True)])
        first = np.clip(peak - half, 0, self.steps.size - width)
        places = first[..., None] + np.arange(width)
        weights = np.take_along_axis(self.log_base[:, None, :], places, axis=2)
        return weights, first[..., None].astype(np.float64)

    def derivatives(self, theta: Array) -> Derivatives:
        """Log-likelihood, score and curvature at log odds ratios ``theta`` of shape (k, n, 1)."""
        base, start = self._window(theta)
        steps = self.steps[: base.shape[2]]
        exponent = base + theta * steps
        top = exponent.max(axis=2, keepdims=True)
        mass = np.exp(exponent - top)
        total = mass.sum(axis=2)
        first = mass @ steps / total
        second = mass @ steps**2 / total
        shift = self.shift[:, None] - start[..., 0]
        observed = np.take_along_axis(self.log_base, self.shift[:, None].astype(np.int64), axis=1)
        value = observed + shift * theta[..., 0] - top[..., 0] - np.log(total)
        gradient = shift - first
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
    inside = np.isfinite(log_base[:, 1:])
    falls = np.where(inside, log_base[:, :-1] - np.where(inside, log_base[:, 1:], 0.0), np.inf)
    return ConditionalTables(shift=a - low, log_base=log_base, steps=steps, falls=falls)


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
