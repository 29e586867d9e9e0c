"""ML and REML estimates of tau2 as the global maximum of the profile likelihood.

The likelihood of the random-effects model can have two maxima in tau2, one of them at zero (Hardy and
Thompson 1996, Stat Med 15:619, model; Fleiss 1993 aspirin trials under ML are an example), so an iteration
that climbs from one start may end on the lower one. Here the slope of the likelihood is read along the whole
range that can hold a maximum, every descent through zero is refined, and the highest maximum is returned.

Range. With weights w and leverages h = w / sum w, the slope is proportional to sum w^2 r^2 - sum w (1 - h)
(REML) or sum w^2 r^2 - sum w (ML). As |r| <= (1 - h) R for R the spread of the estimates, each term is
negative once v + tau2 > R^2: no maximum lies above R^2 - min v.

Grid. The slope is a sum of functions of log(v + tau2) that are each about one unit wide, so it is read at
steps of a quarter unit of log(min v + tau2), and sixteen times as densely where its course could hide a
pair of turning points between two steps.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from treering.errors import NotConvergedError
from treering.pooling.batch import Batch
from treering.pooling.moments import Fit, dot, fit
from treering.pooling.result import FloatArray

GRID_STEP = 0.25
DENSER = 16
MAX_STEPS = 200
RELATIVE_STEP = 1e-8


def maximise(batch: Batch, *, restricted: bool) -> FloatArray:
    """Tau2 at the global maximum of the (restricted) likelihood.

    Parameters
    ----------
    batch : Batch
        Syntheses of at least two trials each, estimates centred near zero.
    restricted : bool
        True for REML (Harville 1977, J Am Stat Assoc 72:320), False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Between-trial variance; the smaller one where two maxima are equally high.

    Raises
    ------
    NotConvergedError
        A maximum could not be refined.
    """
    lowest = batch.v.min(axis=0)
    reach = _reach(batch, lowest)
    best = np.zeros(batch.k.size)
    live = np.flatnonzero(reach > 0.0)
    if live.size == 0:
        return best
    part = batch if live.size == best.size else batch.columns(live)
    best[live] = _search(part, lowest[live], reach[live], GRID_STEP, restricted)
    return best


def _reach(batch: Batch, lowest: FloatArray) -> FloatArray:
    """Length in log(min v + tau2) of the range that can hold a maximum."""
    present = np.isfinite(batch.v)
    spread = np.where(present, batch.y, -np.inf).max(axis=0) - np.where(present, batch.y, np.inf).min(axis=0)
    reach: FloatArray = np.log(np.maximum(spread * spread / lowest, 1.0))
    return reach


def _search(batch: Batch, lowest: FloatArray, reach: FloatArray, step: float, restricted: bool) -> FloatArray:
    grid = _grid(lowest, reach, step)
    slope = np.stack([_slope(fit(batch, t), restricted) for t in grid])
    slope[-1] = np.minimum(slope[-1], 0.0)  # proved above; rounding could leave a speck on the wrong side
    best = _highest(batch, grid, slope, restricted)
    if step == GRID_STEP:
        doubt = np.flatnonzero(_may_hide_a_pair(slope * (grid + lowest)))
        if doubt.size:
            best[doubt] = _search(
                batch.columns(doubt), lowest[doubt], reach[doubt], step / DENSER, restricted
            )
    return best


def _grid(lowest: FloatArray, reach: FloatArray, step: float) -> FloatArray:
    """Values of tau2, shape (points, g), even in log(min v + tau2), from zero to the end of the range."""
    points = max(3, int(np.ceil(reach.max() / step)) + 1)
    shares = np.linspace(0.0, 1.0, points)[:, None]
    grid: FloatArray = lowest * np.expm1(shares * reach)
    return grid


def _slope(now: Fit, restricted: bool) -> FloatArray:
    """Twice the derivative of the profile log-likelihood in tau2."""
    expected = now.total - dot(now.w, now.w) / now.total if restricted else now.total
    return dot(now.pull, now.pull) - expected


def _curvature(now: Fit, restricted: bool) -> FloatArray:
    """Twice the second derivative; from dP/dt = -PP for the projection P of either likelihood."""
    again = now.w * now.pull
    shift = dot(now.w, now.pull)
    bend = dot(again, now.pull) - shift * shift / now.total
    square = dot(now.w, now.w)
    if not restricted:
        return square - 2.0 * bend
    cube = dot(now.w * now.w, now.w)
    ratio = square / now.total
    return square - 2.0 * cube / now.total + ratio * ratio - 2.0 * bend


def _may_hide_a_pair(slope: FloatArray) -> npt.NDArray[np.bool_]:
    """Mark syntheses whose slope turns near zero between two grid points, perhaps crossing it twice."""
    change = np.diff(slope, axis=0)
    before = np.concatenate([2.0 * change[:1] - change[1:2], change[:-1]])
    after = np.concatenate([change[1:], 2.0 * change[-1:] - change[-2:-1]])
    left, right = slope[:-1], slope[1:]
    turns = (before * after <= 0.0) & (left * right > 0.0)
    near = np.minimum(np.abs(left), np.abs(right)) <= 0.5 * np.abs(after - before)
    hidden: npt.NDArray[np.bool_] = (turns & near).any(axis=0)
    return hidden


def _highest(batch: Batch, grid: FloatArray, slope: FloatArray, restricted: bool) -> FloatArray:
    """Refine every descent of the slope through zero and keep the highest maximum."""
    above = slope > 0.0
    descents = above[:-1] & ~above[1:]
    count = descents.sum(axis=0) + ~above[0]
    best = np.zeros(batch.k.size)
    at, which = np.nonzero(descents)
    if at.size == 0:
        return best
    order = np.argsort(which, kind="stable")
    at, which = at[order], which[order]
    whole = which.size == best.size and bool((which == np.arange(best.size)).all())
    part = batch if whole else batch.columns(which)
    found = _refine(part, grid[at, which], grid[at + 1, which], restricted)
    best[which] = found
    for column in np.flatnonzero(count > 1):
        rivals = np.concatenate([[0.0], found[which == column]])
        best[column] = _better(batch.columns(np.array([column])), rivals, restricted)
    return best


def _refine(batch: Batch, low: FloatArray, high: FloatArray, restricted: bool) -> FloatArray:
    """Newton on the slope inside brackets that are cut at every step; halving where Newton leaves them."""
    t = 0.5 * (low + high)
    for _ in range(MAX_STEPS):
        now = fit(batch, t)
        slope = _slope(now, restricted)
        low, high = np.where(slope > 0.0, t, low), np.where(slope > 0.0, high, t)
        moved = t - slope / _nonzero(_curvature(now, restricted))
        inside = (moved >= low) & (moved <= high)
        moved = np.where(inside, moved, 0.5 * (low + high))
        settled = np.abs(moved - t) <= RELATIVE_STEP * (batch.k / now.total)
        t = moved
        if settled.all():
            return t
    raise NotConvergedError("The likelihood of the between-trial variance could not be maximised.")


def _nonzero(values: FloatArray) -> FloatArray:
    """Keep a vanishing curvature from dividing by zero; the step is then rejected by the bracket."""
    return np.where(values == 0.0, np.finfo(float).tiny, values)


def _better(one: Batch, rivals: FloatArray, restricted: bool) -> float:
    """Of several tau2 for one synthesis, the one with the highest likelihood (the first of equals)."""
    values = [log_likelihood(one, np.array([t]), restricted=restricted)[0] for t in rivals]
    return float(rivals[int(np.argmax(values))])


def log_likelihood(batch: Batch, tau2: FloatArray, *, restricted: bool) -> FloatArray:
    """Profile (restricted) log-likelihood without its constant.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    tau2 : ndarray, shape (g,)
        Between-trial variances.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Log-likelihoods; differences are comparable.
    """
    now = fit(batch, tau2)
    spread = np.where(now.w > 0.0, batch.v + tau2, 1.0)
    minus_twice = np.log(spread).sum(axis=0) + now.q
    out: FloatArray = -0.5 * (minus_twice + np.log(now.total) if restricted else minus_twice)
    return out


def modes(batch: Batch, *, restricted: bool) -> Iterator[tuple[float, float]]:
    """List tau2 and log-likelihood of every maximum of one synthesis, in rising tau2.

    Parameters
    ----------
    batch : Batch
        One synthesis of two or more trials.
    restricted : bool
        True for REML, False for ML.

    Yields
    ------
    tuple of float
        Tau2 and log-likelihood (without its constant).
    """
    lowest = batch.v.min(axis=0)
    grid = _grid(lowest, _reach(batch, lowest), GRID_STEP / DENSER)
    slope = np.stack([_slope(fit(batch, t), restricted) for t in grid])
    above = slope[:, 0] > 0.0
    at = np.flatnonzero(above[:-1] & ~above[1:])
    found = [] if above[0] else [0.0]
    for low, high in zip(grid[at, 0], grid[at + 1, 0], strict=True):
        found.append(float(_refine(batch, np.array([low]), np.array([high]), restricted)[0]))
    for t in found:
        yield t, float(log_likelihood(batch, np.array([t]), restricted=restricted)[0])
