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
from treering.pooling.moments import Fit, dot, fit
from treering.pooling.result import FloatArray

MAX_STEPS = 100
RELATIVE_STEP = 1e-8
"""Last step as a fraction of v + tau2. Newton squares the error: the root itself is good to about 1e-15."""


def solve_q(batch: Batch, target: FloatArray, at_zero: Fit, start: FloatArray | None = None) -> FloatArray:
    """Between-trial variance at which the generalised Q equals its target.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    target : ndarray, shape (g,)
        Wanted value of Q, above zero.
    at_zero : Fit
        Sums at tau2 = 0.
    start : ndarray, shape (g,), optional
        First guess; zero if not given.

    Returns
    -------
    ndarray, shape (g,)
        The root, or zero where Q(0) is not above the target.

    Raises
    ------
    NotConvergedError
        The iteration did not settle (not expected: see the module's proof).
    """
    root = np.zeros(batch.k.size)
    active = np.flatnonzero(at_zero.q > target)
    if active.size == 0:
        return root
    whole = active.size == root.size
    part = batch if whole else batch.columns(active)
    goal = target if whole else target[active]
    guess = root if start is None else start
    root[active] = _newton(part, goal, guess[active])
    return root


def _newton(batch: Batch, target: FloatArray, t: FloatArray) -> FloatArray:
    for _ in range(MAX_STEPS):
        now = fit(batch, t)
        slope = dot(now.pull, now.pull)
        moved = np.maximum(t + now.q * (now.q / target - 1.0) / slope, 0.0)
        # Q / |Q'| is the scale of v + t; t itself may be near zero and is no measure of precision.
        settled = np.abs(moved - t) <= RELATIVE_STEP * (now.q / slope)
        t = moved
        if settled.all():
            return t
    raise NotConvergedError(
        "The equation for the between-trial variance did not settle.",
        found=f"{int((~settled).sum())} syntheses open after {MAX_STEPS} steps",
        next_step="Check the units of estimates and variances.",
    )
