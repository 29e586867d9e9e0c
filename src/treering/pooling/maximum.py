"""ML and REML estimates of tau2 as the global maximum of the profile likelihood.

The likelihood can have two maxima in tau2, one of them at zero (the aspirin trials of Fleiss 1993 under ML
are an example, from memory), so an iteration that climbs from one start may end on the lower one. Where
`ascent` proves that there is one maximum at most it is climbed to. Everywhere else the slope is read along
the whole range that can hold a maximum, every descent through zero is refined, and the highest maximum is
taken.

Range. On contrasts free of the mean the model has variances lambda_j + tau2 with every lambda_j between the
smallest and the largest v. The slope of the restricted likelihood is proportional to
sum z_j^2 / (lambda_j + t)^2 - sum 1 / (lambda_j + t), so at most Q(t) / (min v + t) - (k - 1) / (max v + t).
If Q(u) <= k - 1 then Q(t) <= (k - 1) (max v + u) / (max v + t) for t > u, and the slope is negative beyond
u + max v - min v: no maximum lies there. The slope of the full likelihood is lower still.

Grid. The slope per unit of log(min v + tau2) is a sum of bell-shaped functions of that logarithm, about 3.5
units wide at half height. It is read at steps of GRID_STEP, and DENSER times as densely where its course
could hide two crossings between two steps. In 1.4 million random syntheses of 2 to 20 trials, made to have
many maxima, no maximum was missed that a grid of 600 points found.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from treering.pooling.ascent import refine, single_maximum
from treering.pooling.batch import Batch
from treering.pooling.likelihood import Slope, log_likelihood, slope, slope_terms
from treering.pooling.moments import sums
from treering.pooling.qroot import newton_step
from treering.pooling.result import FloatArray
from treering.pooling.uniqueness import TINY

GRID_STEP = 1.0
DENSER = 4
LEVEL = 0.4
NEAR = 0.5


def maximise(batch: Batch, at_zero: Slope, *, restricted: bool) -> FloatArray:
    """Tau2 at the global maximum of the (restricted) likelihood.

    Parameters
    ----------
    batch : Batch
        Syntheses of at least two trials each, estimates centred near zero.
    at_zero : Slope
        The slope at tau2 = 0.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray, shape (g,)
        Between-trial variance; the smaller one where two maxima are equally high.

    Raises
    ------
    NotConvergedError
        A maximum could not be refined.
    """
    best, left = single_maximum(batch, at_zero, restricted=restricted)
    if left.size:
        best[left] = _highest(batch.columns(left), at_zero.columns(left), restricted)
    return best


def _highest(batch: Batch, at_zero: Slope, restricted: bool) -> FloatArray:
    """Read the slope along the whole range and take the highest of all maxima."""
    lowest, reach = _range(batch, at_zero)
    best, doubt = _search(batch, at_zero, lowest, reach, GRID_STEP, restricted)
    if doubt.size:
        part = batch.columns(doubt), at_zero.columns(doubt), lowest[doubt], reach[doubt]
        best[doubt], _ = _search(*part, GRID_STEP / DENSER, restricted)
    return best


def modes(batch: Batch, *, restricted: bool) -> Iterator[tuple[float, float]]:
    """List tau2 and log-likelihood of every maximum of one synthesis, in rising tau2.

    Parameters
    ----------
    batch : Batch
        One synthesis of two or more trials, estimates centred near zero.
    restricted : bool
        True for REML, False for ML.

    Yields
    ------
    tuple of float
        Tau2 and log-likelihood (without its constant).
    """
    at_zero = slope(batch, np.zeros(1), restricted=restricted)
    lowest, reach = _range(batch, at_zero)
    grid = _grid(lowest, reach, GRID_STEP / DENSER)
    found, _, falls = _maxima(batch, grid, *_read(batch, at_zero, grid, restricted), restricted)
    for t in ([0.0] if falls[0] else []) + found.tolist():
        yield t, float(log_likelihood(batch, np.array([t]), restricted=restricted)[0])


def _range(batch: Batch, at_zero: Slope) -> tuple[FloatArray, FloatArray]:
    """Smallest v, and the length in log(min v + tau2) of the range that can hold a maximum."""
    lowest = batch.v.min(axis=0)
    highest = np.where(np.isfinite(batch.v), batch.v, 0.0).max(axis=0)
    degrees = batch.k - 1.0
    first, _ = newton_step(at_zero, degrees, np.zeros(batch.k.size))
    q = sums(batch, first).q
    # Where Q is still above k - 1, the bound on Q in the module's text gives a place where it no longer is.
    beyond = np.where(q > degrees, (highest + first) * (q / degrees) - highest, first)
    return lowest, np.log((beyond + highest) / lowest)


def _grid(lowest: FloatArray, reach: FloatArray, step: float) -> FloatArray:
    """Values of tau2, shape (points, g), even in log(min v + tau2), from zero to the end of the range."""
    points = max(4, int(np.ceil(reach.max() / step)) + 1)
    shares = np.linspace(0.0, 1.0, points)[:, None]
    grid: FloatArray = lowest * np.expm1(shares * reach)
    return grid


def _read(batch: Batch, at_zero: Slope, grid: FloatArray, restricted: bool) -> tuple[FloatArray, FloatArray]:
    """Terms A and B of the slope at every grid point, shape (points, g)."""
    a, b = np.empty_like(grid), np.empty_like(grid)
    a[0], b[0] = at_zero.a, at_zero.b
    owner = np.tile(np.arange(batch.k.size), len(grid) - 1)
    terms = slope_terms(batch, grid[1:].ravel(), restricted=restricted, owner=owner)
    a[1:], b[1:] = (term.reshape(grid[1:].shape) for term in terms)
    a[-1] = np.minimum(a[-1], b[-1])  # proved above; rounding could leave a speck on the wrong side
    return a, b


def _search(
    batch: Batch, at_zero: Slope, lowest: FloatArray, reach: FloatArray, step: float, restricted: bool
) -> tuple[FloatArray, npt.NDArray[np.intp]]:
    """Highest maximum on one grid, and the syntheses for which the grid may be too coarse."""
    grid = _grid(lowest, reach, step)
    a, b = _read(batch, at_zero, grid, restricted)
    found, which, falls = _maxima(batch, grid, a, b, restricted)
    best = np.zeros(batch.k.size)
    best[which] = found
    contested = np.bincount(which, minlength=best.size) + falls > 1
    if contested.any():
        _settle(best, batch, found, which, np.flatnonzero(contested), restricted)
    return best, np.flatnonzero(_may_hide_a_pair((a - b) * (grid + lowest)))


def _may_hide_a_pair(slope: FloatArray) -> npt.NDArray[np.bool_]:
    """Mark syntheses whose slope may cross zero twice more between two grid points than their signs show.

    Parameters
    ----------
    slope : ndarray, shape (points, g)
        Slope per unit of log(min v + tau2).

    Returns
    -------
    ndarray of bool, shape (g,)
        True where the slope turns or is nearly level, at or near zero.
    """
    change = np.diff(slope, axis=0)
    before = np.concatenate([2.0 * change[:1] - change[1:2], change[:-1]])
    after = np.concatenate([change[1:], 2.0 * change[-1:] - change[-2:-1]])
    left, right = slope[:-1], slope[1:]
    turns = before * after <= 0.0
    level = np.abs(change) <= LEVEL * np.minimum(np.abs(before), np.abs(after))
    crosses = left * right <= 0.0
    near = np.minimum(np.abs(left), np.abs(right)) <= NEAR * np.abs(after - before)
    hidden: npt.NDArray[np.bool_] = ((turns | level) & (crosses | near)).any(axis=0)
    return hidden


def _maxima(
    batch: Batch, grid: FloatArray, a: FloatArray, b: FloatArray, restricted: bool
) -> tuple[FloatArray, npt.NDArray[np.intp], npt.NDArray[np.bool_]]:
    """Every descent of the slope through zero refined, whose it is, and who has a maximum at zero."""
    above = a > b
    at, which = np.nonzero(above[:-1] & ~above[1:])
    order = np.argsort(which, kind="stable")
    at, which = at[order], which[order]
    if which.size == 0:
        return np.zeros(0), which, ~above[0]
    low, high = grid[at, which], grid[at + 1, which]
    start = _first_guess(grid, a, b, at, which)
    every = which.size == batch.k.size and bool((which == np.arange(which.size)).all())
    part = batch if every else batch.columns(which)
    return refine(part, low, high, start, restricted=restricted), which, ~above[0]


def _first_guess(
    grid: FloatArray, a: FloatArray, b: FloatArray, at: npt.NDArray[np.intp], which: npt.NDArray[np.intp]
) -> FloatArray:
    """Where B / A = 1 by inverse quadratic interpolation through the bracket and the point beside it.

    B / A is nearly linear in tau2, exactly so for equal variances.
    """
    beside = np.where(at > 0, at - 1, at + 2)
    t0, t1, t2 = (grid[row, which] for row in (at, at + 1, beside))
    r0, r1, r2 = (b[row, which] / np.maximum(a[row, which], TINY) - 1.0 for row in (at, at + 1, beside))
    straight = (t1 - t0) / (r1 - r0)
    bend = ((t2 - t1) / (r2 - r1) - straight) / (r2 - r0)
    guess = t0 - r0 * straight + r0 * r1 * bend
    return np.where((guess > t0) & (guess < t1), guess, t0 - r0 * straight)


def _settle(
    best: FloatArray,
    batch: Batch,
    found: FloatArray,
    which: npt.NDArray[np.intp],
    contested: npt.NDArray[np.intp],
    restricted: bool,
) -> None:
    """Write the highest of several maxima, tau2 = 0 among them, into `best` (the first of equals)."""
    mine = np.isin(which, contested)
    owner = np.concatenate([contested, which[mine]])
    t = np.concatenate([np.zeros(contested.size), found[mine]])
    height = log_likelihood(batch.columns(owner), t, restricted=restricted)
    # Sorted by owner and then from low to high: the last one written for each owner is its highest.
    for at in np.lexsort((-t, height, owner)):
        best[owner[at]] = t[at]
