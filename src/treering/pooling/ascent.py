"""Climb to the maximum of a likelihood in tau2 where there is proved to be only one.

The maximum is where B / A = 1 (A and B as in `uniqueness`). B / A is nearly linear in tau2, exactly so for
equal variances, so tau2 is interpolated as a function of B / A - 1, through value and slope at the two places
that served the proof and through the value at every place visited since. What has not settled after a few
such steps goes on by Newton's method inside a bracket.
"""

from __future__ import annotations

import numpy as np

from treering.errors import NotConvergedError
from treering.pooling.batch import Batch, IntArray
from treering.pooling.interpolation import Course
from treering.pooling.likelihood import Slope, slope, slope_terms
from treering.pooling.result import FloatArray
from treering.pooling.uniqueness import TINY, BoolArray, Stretch, hiding, one_at_most, threshold

MAX_STEPS = 200
RELATIVE_STEP = 1e-6
"""Last step as a fraction of v + tau2. Every step squares the error, so tau2 is good to about 1e-12."""
INTERPOLATIONS = 3
INTERPOLATED_STEP = 1e-7
"""The same for interpolation, whose last step says less about the error."""
FURTHER = 2.0
"""Newton's step towards the proof falls short; the second one is taken this many times as far."""


def single_maximum(batch: Batch, zero: Slope, *, restricted: bool) -> tuple[FloatArray, IntArray]:
    """Maximum of every likelihood that readings of its slope prove to have only one.

    Parameters
    ----------
    batch : Batch
        Syntheses of at least two trials each, estimates centred near zero.
    zero : Slope
        The slope at tau2 = 0.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Tau2 at the maximum; zero also where nothing is proved.
    ndarray of int
        Syntheses of which nothing is proved.
    """
    best, sure, rising = np.zeros(batch.k.size), one_at_most(zero), zero.a > zero.b
    go = np.flatnonzero(rising | ~sure)
    if go.size == 0:
        return best, go
    if go.size < best.size:
        batch, zero, rising, sure = batch.columns(go), zero.columns(go), rising[go], sure[go]
    nought = np.zeros(go.size)
    t = np.where(sure, newton(zero, nought), threshold(zero))
    there, above = _far_enough(batch, t, sure, restricted)
    proved, open_ = above, np.flatnonzero(above & ~sure)
    below = Stretch(nought, t, zero, there).columns(open_)
    proved[hiding(batch, open_, below, restricted=restricted)] = False
    climbing = np.flatnonzero(proved & rising)
    if climbing.size:
        ends = zero.columns(climbing), there.columns(climbing)
        best[go[climbing]] = _climb(batch.columns(climbing), t[climbing], *ends, restricted)
    return best, go[~proved]


def _far_enough(batch: Batch, t: FloatArray, sure: BoolArray, restricted: bool) -> tuple[Slope, BoolArray]:
    """Slope at t, and whether one maximum at most is proved beyond; `t` is moved on where it fell short."""
    there = slope(batch, t, restricted=restricted)
    above = sure | one_at_most(there)
    short = np.flatnonzero(~above)
    if short.size:
        t[short] += FURTHER * threshold(there.columns(short))
        again = slope(batch.columns(short), t[short], restricted=restricted)
        for term, moved in zip(there, again, strict=True):
            term[short] = moved
        above[short] = one_at_most(again)
    return there, above


def newton(there: Slope, t: FloatArray) -> FloatArray:
    """Step of Newton's method on B / A = 1."""
    turn = there.b * there.fall_a - there.a * there.fall_b
    return t + (there.a - there.b) * there.a / np.where(turn == 0.0, TINY, turn)


@np.errstate(divide="ignore", invalid="ignore", over="ignore")
def _climb(batch: Batch, t: FloatArray, zero: Slope, there: Slope, restricted: bool) -> FloatArray:
    """Climb to the one maximum from slopes that are known at 0, where it rises, and at t."""
    start, end = zero.b / zero.a - 1.0, there.b / there.a - 1.0
    course = Course.touching(start, np.zeros(t.size), _rate(zero))
    course.touch(end, t, _rate(there))
    # Far beyond t the cubic is no better than the straight line at t.
    share = start / (start - end)
    found = np.where((share > 0.0) & (share < 1.5), course.root(), newton(there, t))
    scale = batch.k / there.total
    for _ in range(INTERPOLATIONS):
        a, b = slope_terms(batch, found, restricted=restricted)
        course.lead_through(b / a - 1.0, found)
        before, found = found, course.root()
        settled = np.abs(found - before) <= INTERPOLATED_STEP * scale
        if settled.all():
            break
    low, high = _bracket(there, t)
    # What is not a number is not inside, and is left to the safe steps.
    inside = (low <= found) & (found <= high)
    left = np.flatnonzero(~(inside & settled))
    if left.size:
        # Outside the bracket: halve it, or where it has no upper end step on by the mean of v + tau2.
        aside = np.where(np.isinf(high), 2.0 * t + scale, 0.5 * t)
        start = np.where(inside, found, aside)[left]
        found[left] = refine(batch.columns(left), low[left], high[left], start, restricted=restricted)
    return found


def _rate(at: Slope) -> FloatArray:
    """Tau2 for each unit of B / A."""
    return at.a * at.a / (at.b * at.fall_a - at.a * at.fall_b)


def _bracket(there: Slope, t: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Where the slope is above zero and where it is not: 0 and t, or t and beyond."""
    rises = there.a > there.b
    return np.where(rises, t, 0.0), np.where(rises, np.inf, t)


def refine(batch: Batch, low: FloatArray, high: FloatArray, t: FloatArray, *, restricted: bool) -> FloatArray:
    """Newton on B / A = 1 inside brackets that shrink at every step; halving where Newton leaves them.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    low, high : ndarray, shape (g,)
        Where the slope is above zero, and where it is not; `high` may be infinite.
    t : ndarray, shape (g,)
        First guess.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Tau2 at the descent of the slope through zero.

    Raises
    ------
    NotConvergedError
        The steps did not settle.
    """
    for _ in range(MAX_STEPS):
        there = slope(batch, t, restricted=restricted)
        rises = there.a > there.b
        low, high = np.where(rises, t, low), np.where(rises, high, t)
        moved, scale = newton(there, t), batch.k / there.total
        half = np.where(np.isinf(high), 2.0 * low + scale, 0.5 * (low + high))
        moved = np.where((moved >= low) & (moved <= high), moved, half)
        unsettled = np.flatnonzero(np.abs(moved - t) > RELATIVE_STEP * scale)
        t = moved
        if unsettled.size == 0:
            return t
        if 2 * unsettled.size < t.size:
            # The few slow ones go on alone.
            rest = batch.columns(unsettled)
            t[unsettled] = refine(rest, low[unsettled], high[unsettled], t[unsettled], restricted=restricted)
            return t
    raise NotConvergedError(
        "The likelihood of the between-trial variance could not be maximised.",
        found=f"{unsettled.size} syntheses open after {MAX_STEPS} steps",
        next_step="Check the units of estimates and variances.",
    )
