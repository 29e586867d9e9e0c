"""Paths of a score statistic that are still inside the bounds, look after look.

At information I the score S = Z sqrt(I) is normal with mean `drift` I and variance I, and its steps are
independent. The density of the paths that have not left yet is carried from look to look by numerical
integration (Armitage, McPherson and Rowe 1969; the layout of nodes is ours). Every exit probability is
a sum of normal tails over the nodes and never one minus something, so an exit probability of 1e-30 keeps
its digits.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cache

import numpy as np
from scipy import special

from treering.errors import NotConvergedError
from treering.monitoring.checks import FloatArray

_NODES_PER_PANEL = 16
_PANEL_WIDTH = 6.0  # in standard deviations of the narrower of the two steps around the look
_REACH = 8.5  # standard deviations beyond which paths are dropped when no bound is nearer (chance 1e-17)
_FAR = 37.0  # standard deviations at which a double still holds a normal tail
_ROOT_2PI = math.sqrt(2.0 * math.pi)


@dataclass(frozen=True, slots=True)
class Paths:
    """Paths still inside the bounds: score values and the probability at each.

    Attributes
    ----------
    information : float
        Information at the last look.
    nodes : ndarray, shape (n,)
        Score values.
    mass : ndarray, shape (n,)
        Probability carried by each node; sums to the chance of being still inside.
    """

    information: float
    nodes: FloatArray
    mass: FloatArray


def start() -> Paths:
    """Return the one path before the first look: score 0 at information 0.

    Returns
    -------
    Paths
    """
    return Paths(0.0, np.zeros(1), np.ones(1))


@cache
def _rule() -> tuple[FloatArray, FloatArray]:
    """Gauss-Legendre nodes and weights on [0, 1]."""
    nodes, weights = np.polynomial.legendre.leggauss(_NODES_PER_PANEL)
    return (nodes + 1.0) / 2.0, weights / 2.0


def _grid(low: float, high: float, scale: float) -> tuple[FloatArray, FloatArray]:
    """Gauss-Legendre panels over [low, high], each narrow against `scale`."""
    panels = max(1, math.ceil((high - low) / (_PANEL_WIDTH * scale)))
    edges = np.linspace(low, high, panels + 1)
    width = np.diff(edges)
    nodes, weights = _rule()
    return (edges[:-1, None] + width[:, None] * nodes).ravel(), (width[:, None] * weights).ravel()


def tail(paths: Paths, information: float, score: float, *, drift: float = 0.0) -> float:
    """Return the chance to be still inside now and above `score` at the next look.

    Parameters
    ----------
    paths : Paths
        Paths inside so far.
    information : float
        Information at the next look.
    score : float
        Score at the next look; infinity gives 0.
    drift : float
        Mean of the score per unit of information.

    Returns
    -------
    float
    """
    step = information - paths.information
    reach = (paths.nodes + (drift * step - score)) / math.sqrt(step)
    return float(paths.mass @ special.ndtr(reach))


def mirrored(paths: Paths) -> Paths:
    """Return the paths with the sign of the score turned, so that lower tails are upper tails.

    Parameters
    ----------
    paths : Paths
        Paths inside so far.

    Returns
    -------
    Paths
    """
    return Paths(paths.information, -paths.nodes, paths.mass)


def advance(
    paths: Paths,
    information: float,
    regions: list[tuple[float, float]],
    next_information: float,
    *,
    drift: float = 0.0,
) -> Paths:
    """Return the paths that are inside one of the `regions` at the next look.

    Parameters
    ----------
    paths : Paths
        Paths inside so far.
    information : float
        Information at the next look.
    regions : list of (low, high)
        Score intervals in which a path goes on; ends may be infinite.
    next_information : float
        Information at the look after it, which sets how fine the nodes must be.
    drift : float
        Mean of the score per unit of information.

    Returns
    -------
    Paths
    """
    sigma = math.sqrt(information - paths.information)
    scale = min(sigma, math.sqrt(next_information - information))
    ends = [_clipped(low, high, information, drift) for low, high in regions]
    grids = [_grid(low, high, scale) for low, high in ends if low < high]
    if not grids:
        return Paths(information, np.zeros(1), np.zeros(1))
    nodes = np.concatenate([grid[0] for grid in grids])
    weights = np.concatenate([grid[1] for grid in grids])
    steps = (nodes[:, None] - (paths.nodes + drift * sigma**2)) / sigma
    density = np.exp(-0.5 * steps * steps) @ paths.mass / (sigma * _ROOT_2PI)
    return Paths(information, nodes, weights * density)


def _clipped(low: float, high: float, information: float, drift: float) -> tuple[float, float]:
    """Cut an open end where the chance to be beyond it is 1e-17; a bound that is set is kept."""
    mean, spread = drift * information, math.sqrt(information)
    floor = mean - (_REACH if math.isinf(low) else _FAR) * spread
    ceiling = mean + (_REACH if math.isinf(high) else _FAR) * spread
    return max(low, floor), min(high, ceiling)


def tail_bound(paths: Paths, information: float, target: float, *, drift: float = 0.0) -> float:
    """Return the score above which exactly `target` of the paths leave at the next look.

    Parameters
    ----------
    paths : Paths
        Paths inside so far.
    information : float
        Information at the next look.
    target : float
        Chance to be still inside now and above the score then.
    drift : float
        Mean of the score per unit of information.

    Returns
    -------
    float
        Infinity when `target` is 0 or too small for a double.

    Raises
    ------
    NotConvergedError
        If fewer paths are left than should leave.

    Notes
    -----
    The logarithm of a normal tail smoothed over an interval is concave, so Newton's method on it,
    started above the root, comes down to it without overshooting.
    """
    sigma = math.sqrt(information - paths.information)
    shift = drift * sigma**2
    ceiling = float(paths.nodes.max()) + shift + _FAR * sigma
    if target <= tail(paths, information, ceiling, drift=drift):
        return math.inf
    single = drift * information - float(special.ndtri(min(target, 1.0))) * math.sqrt(information)
    score = min(single, ceiling)
    for _ in range(100):
        left = tail(paths, information, score, drift=drift)
        if not left > 0.0:
            break
        reach = (score - shift - paths.nodes) / sigma
        slope = float(paths.mass @ np.exp(-0.5 * reach * reach)) / (sigma * _ROOT_2PI)
        change = left * math.log(left / target) / slope
        score += change
        if abs(change) <= 1e-13 * (1.0 + abs(score)):
            return score
    raise NotConvergedError(
        "No bound was found for this look.",
        found=f"{target:g} of probability to spend, {float(paths.mass.sum()):g} of the paths left",
        expected="less to spend than is left",
        next_step="Check the informations and bounds of the earlier looks.",
    )
