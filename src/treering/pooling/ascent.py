"""Climb to the maximum of a likelihood in tau2, and prove where there is only one.

On contrasts free of the mean the model has variances lambda_j + t, so with u_j = 1 / (lambda_j + t) the slope
of the restricted likelihood is (A - B) / 2, A = sum z_j^2 u_j^2, B = sum u_j; the full likelihood has
B = sum w. Write Q = sum z_j^2 u_j, C = -B' (sum u_j^2, or sum w^2) and E = -A' / 2 = sum z_j^2 u_j^3.

Above t. Where A = B, Cauchy and Schwarz give E >= A^2 / Q = B^2 / Q, so the slope falls through zero there
if Q < 2 B^2 / C. Q falls in t and B^2 / C rises (the same inequality on sums of u). If it holds at t it
therefore holds beyond: from t on there is one maximum at most, and none if the slope is not above zero at t.

Below t. A and B fall and are convex, so their chord over [0, t] lies above and their tangents lie below: a
tangent of A above the chord of B, or the other way round, rules out a zero in between. Where -A' at t is
above -B' at zero the slope falls all the way.

The stretch below is cut into parts where its ends do not tell enough. What all this leaves open is for the
search in `maximum`. Derived here, no source.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from treering.errors import NotConvergedError
from treering.pooling.batch import Batch, IntArray, spans
from treering.pooling.likelihood import Slope, slope
from treering.pooling.moments import Fit, fit
from treering.pooling.result import FloatArray

BoolArray = npt.NDArray[np.bool_]
MAX_STEPS = 200
RELATIVE_STEP = 1e-6
SURE = 2.0 - 1e-6
"""The 2 of the first proof, less what rounding could add to the sums."""
PARTS = (4, 32)
"""Parts into which a stretch is cut whose two ends do not tell enough; then those still open."""
TINY = np.finfo(np.float64).tiny


def single_maximum(batch: Batch, at_zero: Fit, *, restricted: bool) -> tuple[FloatArray, IntArray]:
    """Maximum of every likelihood that two readings of its slope prove to have only one.

    Parameters
    ----------
    batch : Batch
        Syntheses of at least two trials each, estimates centred near zero.
    at_zero : Fit
        Sums at tau2 = 0.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Tau2 at the maximum; zero also where nothing is proved.
    ndarray of int
        Syntheses of which nothing is proved.
    """
    best, zero = np.zeros(batch.k.size), slope(at_zero, restricted=restricted)
    sure, q = _one_at_most(at_zero.q, zero), at_zero.q
    rising = zero.a > zero.b
    go = np.flatnonzero(rising | ~sure)
    if go.size == 0:
        return best, go
    if go.size < best.size:
        batch, zero, q, rising, sure = batch.columns(go), zero.columns(go), q[go], rising[go], sure[go]
    nought = np.zeros(go.size)
    t = np.where(sure, newton(zero, nought), _threshold(q, zero))
    now = fit(batch, t)
    there = slope(now, restricted=restricted)
    above = _one_at_most(now.q, there)
    proved = sure | (above & _nothing_hidden(zero, there, t))
    for parts in PARTS:
        near = np.flatnonzero(above & ~proved)
        for span in spans(near.size, (parts - 1) * len(batch.y)):
            some = near[span]
            ends = zero.columns(some), there.columns(some)
            proved[some] = _nothing_hidden_in_parts(batch.columns(some), *ends, t[some], parts, restricted)
    climb = np.flatnonzero(proved & rising)
    part = batch if climb.size == go.size else batch.columns(climb)
    ends = zero.columns(climb), there.columns(climb)
    best[go[climb]] = _climb(part, t[climb], now.total[climb], ends, restricted)
    return best, go[~proved]


def _one_at_most(q: FloatArray, there: Slope) -> BoolArray:
    """Whether the likelihood has one maximum at most from here on."""
    single: BoolArray = q * there.fall_b < SURE * there.b * there.b
    return single


def _threshold(q: FloatArray, there: Slope) -> FloatArray:
    """About where one maximum at most is proved: Newton's step to Q = 2 B^2 / C, which itself rises."""
    excess = q * there.fall_b / (2.0 * there.b * there.b) - 1.0
    return q / np.maximum(there.a, TINY) * np.maximum(excess, 0.0)


def _nothing_hidden(left: Slope, right: Slope, width: FloatArray) -> BoolArray:
    """Whether the signs of the slope at two places tell everything about the stretch between."""
    up = (left.a > left.b) & (right.a > right.b) & (right.a + width * right.fall_a > left.b)
    down = (left.a < left.b) & (right.a < right.b) & (right.b + width * right.fall_b > left.a)
    shown: BoolArray = up | down | (right.fall_a > left.fall_b)
    return shown


def _nothing_hidden_in_parts(
    batch: Batch, zero: Slope, there: Slope, t: FloatArray, parts: int, restricted: bool
) -> BoolArray:
    """Whether the same can be shown part by part; the slope of every part that hides nothing only falls."""
    places = (np.arange(1.0, parts) / parts)[:, None] * t
    read = slope(fit(batch.repeated(parts - 1), places.ravel()), restricted=restricted)
    between = [term.reshape(places.shape) for term in read]
    course = Slope(*(np.vstack(terms) for terms in zip(zero, between, there, strict=True)))
    left, right = (Slope(*(term[rows] for term in course)) for rows in (slice(-1), slice(1, None)))
    shown: BoolArray = np.all(_nothing_hidden(left, right, t / parts), axis=0)
    return shown


def newton(there: Slope, t: FloatArray) -> FloatArray:
    """Step of Newton's method on B / A = 1; B / A is nearly linear in t, exactly so for equal variances."""
    turn = there.b * there.fall_a - there.a * there.fall_b
    return t + (there.a - there.b) * there.a / np.where(turn == 0.0, TINY, turn)


def _between(zero: Slope, there: Slope, t: FloatArray) -> FloatArray:
    """Where B / A = 1 by cubic inverse interpolation through value and slope of B / A at 0 and at t."""
    (r0, d0), (r1, d1) = (
        (at.b / at.a - 1.0, at.a * at.a / (at.b * at.fall_a - at.a * at.fall_b)) for at in (zero, there)
    )
    wide = r1 - r0
    share = -r0 / wide
    rest = 1.0 - share
    back = -(1.0 + 2.0 * share) * rest * t + wide * share * (rest * d0 - share * d1)
    guess: FloatArray = t + rest * back
    # Beyond t the cubic is no better than the straight line at t, and further out it is worse.
    return np.where((share > 0.0) & (share < 1.5), guess, newton(there, t))


def _climb(
    batch: Batch, t: FloatArray, total: FloatArray, ends: tuple[Slope, Slope], restricted: bool
) -> FloatArray:
    """Climb to the one maximum from slopes that are known at 0, where it rises, and at t."""
    zero, there = ends
    below = there.a > there.b
    low, high = np.where(below, t, 0.0), np.where(below, np.inf, t)
    moved = _between(zero, there, t)
    inside = (moved >= low) & (moved <= high)
    # Outside the bracket: halve it, or where it has no upper end step on by the weighted mean of v + tau2.
    aside = np.where(below, 2.0 * t + batch.k / total, 0.5 * t)
    return refine(batch, low, high, np.where(inside, moved, aside), restricted=restricted)


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
        now = fit(batch, t)
        there = slope(now, restricted=restricted)
        below = there.a > there.b
        low, high = np.where(below, t, low), np.where(below, high, t)
        moved, scale = newton(there, t), batch.k / now.total
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
