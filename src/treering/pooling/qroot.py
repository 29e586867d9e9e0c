"""Solve Q(t) = target for tau2: the Paule-Mandel estimate and the Q-profile interval.

Written on contrasts that are free of the mean, Q(t) = sum z_j^2 / (lambda_j + t) with lambda_j > 0, so
1 / Q(t) is a weighted harmonic mean of (lambda_j + t): increasing and concave in t. Newton's method on
1 / Q(t) = 1 / target therefore lands at or left of the root after one step from anywhere and climbs
monotonically from there, with no bracket and no step control; for equal variances it is exact in one step.
"""

from __future__ import annotations

import numpy as np

from treering.errors import NotConvergedError
from treering.pooling.batch import Batch
from treering.pooling.likelihood import Slope
from treering.pooling.moments import Sums, sums
from treering.pooling.result import FloatArray

MAX_STEPS = 100
RELATIVE_STEP = 1e-6
"""Last step as a fraction of v + tau2. Newton squares the error: the root itself is good to about 1e-12."""


def solve_q(
    batch: Batch, target: FloatArray, at_zero: Sums | Slope, t: FloatArray, at_t: Sums | Slope
) -> FloatArray:
    """Between-trial variance at which the generalised Q equals its target.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    target : ndarray, shape (g,)
        Wanted value of Q, above zero.
    at_zero : Sums or Slope
        Sums at tau2 = 0.
    t : ndarray, shape (g,)
        First guess.
    at_t : Sums or Slope
        Sums at the first guess; known already, so the first step costs no new sums.

    Returns
    -------
    ndarray, shape (g,)
        The root, or zero where Q(0) is not above the target.

    Raises
    ------
    NotConvergedError
        The iteration did not settle (not expected: see the module's proof).
    """
    active = np.flatnonzero(at_zero.q > target)
    if 2 * active.size > batch.k.size:
        # Syntheses without a root settle on zero by themselves; copying the others would cost more.
        return _newton(batch, target, newton_step(at_t, target, t)[0])
    root = np.zeros(batch.k.size)
    if active.size:
        first, _ = newton_step(at_t.columns(active), target[active], t[active])
        root[active] = _newton(batch.columns(active), target[active], first)
    return root


def newton_step(now: Sums | Slope, target: FloatArray, t: FloatArray) -> tuple[FloatArray, FloatArray]:
    """One step towards the root.

    Parameters
    ----------
    now : Sums or Slope
        Sums at t.
    target : ndarray, shape (g,)
        Wanted value of Q.
    t : ndarray, shape (g,)
        Where to step from.

    Returns
    -------
    tuple of ndarray
        New place (never below zero, and left of the root if there is one), and the scale Q / |Q'| of
        v + tau2 at the old place; t itself may be near zero and is no measure of precision.
    """
    scale = now.q / np.maximum(now.a, np.finfo(np.float64).tiny)
    return np.maximum(t + scale * (now.q / target - 1.0), 0.0), scale


def _newton(batch: Batch, target: FloatArray, t: FloatArray) -> FloatArray:
    for _ in range(MAX_STEPS):
        moved, scale = newton_step(sums(batch, t), target, t)
        unsettled = np.flatnonzero(np.abs(moved - t) > RELATIVE_STEP * scale)
        t = moved
        if unsettled.size == 0:
            return t
        if 2 * unsettled.size < t.size:
            # The few slow ones go on alone.
            t[unsettled] = _newton(batch.columns(unsettled), target[unsettled], t[unsettled])
            return t
    raise NotConvergedError(
        "The equation for the between-trial variance did not settle.",
        found=f"{unsettled.size} syntheses open after {MAX_STEPS} steps",
        next_step="Check the units of estimates and variances.",
    )
