"""Paths of a score statistic that are still inside the bounds, look after look.

At information I the score S = Z sqrt(I) is normal with mean `drift` I and variance I, and its steps are
independent. The density of the paths that have not left yet is carried from look to look by numerical
integration (Armitage, McPherson and Rowe 1969; the layout of nodes is ours). Every exit probability is
a sum of normal tails over the nodes and never one minus something, so an exit probability of 1e-30 keeps
its digits.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from scipy import special

from treering.errors import NotConvergedError
from treering.monitoring.checks import FloatArray
from treering.monitoring.panels import NODES, PANEL_WIDTH, fill, panel_edges, window

_REACH = 8.5  # standard deviations beyond which paths are dropped when no bound is nearer (chance 1e-17)
_FAR = 37.0  # standard deviations at which a double still holds a normal tail
_LEAST = 1e-300  # the least probability that can be spent
_WINDOW = 9.0  # standard deviations of a step that a window into a wide panel takes in
_DENSE = 40_000  # pairs of nodes up to which all are summed
_BLOCK = 64
_ROOT_2PI = math.sqrt(2.0 * math.pi)


@dataclass(frozen=True, slots=True)
class Paths:
    """Paths still inside the bounds: score values and the probability at each.

    Attributes
    ----------
    information : float
        Information at the last look.
    nodes : ndarray, shape (16 p,)
        Score values, panel by panel (a single one before the first look).
    mass : ndarray, shape (16 p,)
        Probability carried by each node; sums to the chance of being still inside.
    left, width : ndarray, shape (p,)
        The panels.
    widest : float
        Width of the widest panel.
    cuts : tuple of (position, information)
        Where and when paths were cut off; positions are score less drift times information.
    """

    information: float
    nodes: FloatArray
    mass: FloatArray
    left: FloatArray
    width: FloatArray
    widest: float
    cuts: tuple[tuple[float, float], ...]


def start() -> Paths:
    """Return the one path before the first look: score 0 at information 0.

    Returns
    -------
    Paths
    """
    return Paths(0.0, np.zeros(1), np.ones(1), np.zeros(0), np.zeros(0), 0.0, ())


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
    return Paths(
        paths.information,
        -paths.nodes[::-1],
        paths.mass[::-1],
        -(paths.left + paths.width)[::-1],
        paths.width[::-1],
        paths.widest,
        tuple((-place, when) for place, when in paths.cuts),
    )


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
    sigma, goal = math.sqrt(step), score - drift * step
    nodes, mass = _narrow(paths, sigma)
    total = float(mass @ special.ndtr((nodes - goal) / sigma))
    low, high = goal - _WINDOW * sigma, goal + _WINDOW * sigma
    for left, width, held in _wide(paths, sigma):
        right = left + width
        if left >= high:
            total += float(held.sum())
        elif right > low:
            total += _straddling(left, width, held, goal, sigma)
    return total


def _straddling(left: float, width: float, held: FloatArray, goal: float, sigma: float) -> float:
    """Chance to end above the goal from a wide panel that the goal is in or next to."""
    ends = np.clip(goal + _WINDOW * sigma * np.array([-1.0, 1.0]), left, left + width)
    nodes, mass = window(left, width, held, ends, np.array([ends[1], left + width]))
    return float(np.sum(mass * special.ndtr((nodes - goal) / sigma)))


def density(paths: Paths, information: float, scores: FloatArray, *, drift: float = 0.0) -> FloatArray:
    """Return the density of the score at the next look over paths that are still inside now.

    Parameters
    ----------
    paths : Paths
        Paths inside so far.
    information : float
        Information at the next look.
    scores : ndarray, shape (m,)
        Scores at the next look.
    drift : float
        Mean of the score per unit of information.

    Returns
    -------
    ndarray, shape (m,)
    """
    step = information - paths.information
    sigma, goals = math.sqrt(step), scores - drift * step
    nodes, mass = _narrow(paths, sigma)
    total = _smoothed(goals, nodes, mass, sigma, math.sqrt(information))
    for left, width, held in _wide(paths, sigma):
        near = (goals > left - _WINDOW * sigma) & (goals < left + width + _WINDOW * sigma)
        low = np.maximum(goals[near] - _WINDOW * sigma, left)
        high = np.minimum(goals[near] + _WINDOW * sigma, left + width)
        nodes, mass = window(left, width, held, low, high)
        total[near] += np.sum(mass * _bells((goals[near, None] - nodes) / sigma), axis=1)
    return total / (sigma * _ROOT_2PI)


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
    after = math.sqrt(next_information - information)
    scale = min(math.sqrt(information - paths.information), after)
    ends = [_clipped(low, high, information, drift) for low, high in regions]
    ends = [(low, high) for low, high in ends if low < high]
    if not ends:
        return Paths(information, np.zeros(0), np.zeros(0), np.zeros(0), np.zeros(0), 0.0, paths.cuts)

    def steep() -> list[tuple[float, float]]:
        old = [(cut + drift * information, math.sqrt(information - when)) for cut, when in paths.cuts]
        return old + [(end, after) for pair in ends for end in pair]

    panels = [panel_edges(low, high, scale, steep, math.sqrt(information)) for low, high in ends]
    left = np.concatenate([edges[:-1] for edges in panels])
    width = np.concatenate([edges[1:] - edges[:-1] for edges in panels])
    nodes, weights = fill(left, width)
    mass = weights * density(paths, information, nodes, drift=drift)
    cuts = (*paths.cuts, *((end - drift * information, information) for pair in ends for end in pair))
    return Paths(information, nodes, mass, left, width, float(width.max()), cuts)


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
        Infinity when `target` is 0 or too small for a double (below 1e-300).

    Raises
    ------
    NotConvergedError
        If fewer paths are left than should leave.

    Notes
    -----
    The logarithm of a normal tail smoothed over an interval is concave, so Newton's method on it,
    started above the root, comes down to it without overshooting.
    """
    if not target >= _LEAST:
        return math.inf
    if target < float(paths.mass.sum()):
        score = _descend(paths, information, target, drift)
        if score is not None:
            return score
    raise NotConvergedError(
        "No bound was found for this look.",
        found=f"{target:g} of probability to spend, {float(paths.mass.sum()):g} of the paths left",
        expected="less to spend than is left",
        next_step="Check the informations and bounds of the earlier looks.",
    )


def _descend(paths: Paths, information: float, target: float, drift: float) -> float | None:
    """Newton's method on the logarithm of the tail; None when it does not settle."""
    sigma = math.sqrt(information - paths.information)
    edge = float(paths.nodes.max()) + drift * sigma**2
    reach = -float(special.ndtri(target))
    score = min(drift * information + reach * math.sqrt(information), edge + reach * sigma)
    close = min(1e-11 * math.sqrt(information), 1e-4 * sigma)  # the step after it is the square of it
    for _ in range(100):
        left = tail(paths, information, score, drift=drift)
        slope = float(density(paths, information, np.array([score]), drift=drift)[0])
        if not (left > 0.0 and slope > 0.0):  # too far out for a double
            score = (score + edge) / 2.0
            continue
        change = left * math.log(left / target) / slope
        score += change
        if abs(change) <= close:
            return score
    return None


def _clipped(low: float, high: float, information: float, drift: float) -> tuple[float, float]:
    """Cut an open end where the chance to be beyond it is 1e-17; a bound that is set is kept."""
    mean, spread = drift * information, math.sqrt(information)
    floor = mean - (_REACH if math.isinf(low) else _FAR) * spread
    ceiling = mean + (_REACH if math.isinf(high) else _FAR) * spread
    return max(low, floor), min(high, ceiling)


def _smoothed(
    goals: FloatArray, nodes: FloatArray, mass: FloatArray, sigma: float, spread: float
) -> FloatArray:
    """Sum exp(-distance^2/2) over the nodes that count, distances in units of the step.

    Only nodes near a goal count: within 9 standard deviations of the step around where a path that ends
    there came from, which for a Z of z at the goal is z sigma/spread standard deviations nearer to 0.
    """
    if goals.size * nodes.size <= _DENSE:
        return _bells((goals[:, None] - nodes) / sigma) @ mass
    total = np.empty(goals.size)
    for first in range(0, goals.size, _BLOCK):
        block = goals[first : first + _BLOCK]
        low, high = float(block.min()), float(block.max())
        reach = sigma * (_WINDOW + max(abs(low), abs(high)) * sigma / spread**2)
        ends = [min(low, nodes[-1]) - reach, max(high, nodes[0]) + reach]
        begin, end = np.searchsorted(nodes, ends)
        near = slice(int(begin), int(end))
        total[first : first + _BLOCK] = _bells((block[:, None] - nodes[near]) / sigma) @ mass[near]
    return total


def _bells(away: FloatArray) -> FloatArray:
    """Turn distances in standard deviations into exp(-distance^2/2), in place to spare memory."""
    np.square(away, out=away)
    away *= -0.5
    return np.exp(away, out=away)


def _narrow(paths: Paths, sigma: float) -> tuple[FloatArray, FloatArray]:
    """Nodes and mass of the panels that resolve a step of this standard deviation as they are."""
    limit = _widest_resolved(sigma)
    if paths.widest <= limit:
        return paths.nodes, paths.mass
    narrow = np.repeat(paths.width <= limit, NODES)
    return paths.nodes[narrow], paths.mass[narrow]


def _wide(paths: Paths, sigma: float) -> Iterator[tuple[float, float, FloatArray]]:
    """Yield the other panels, which are sampled anew within windows, with the mass of their nodes."""
    limit = _widest_resolved(sigma)
    if paths.widest <= limit:
        return
    for place in np.flatnonzero(paths.width > limit):
        held = paths.mass[place * NODES : (place + 1) * NODES]
        yield float(paths.left[place]), float(paths.width[place]), held


def _widest_resolved(sigma: float) -> float:
    """Width up to which a panel resolves a step of this standard deviation."""
    return PANEL_WIDTH * sigma * (1.0 + 1e-9)
