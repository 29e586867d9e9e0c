"""Where the density of the paths is sampled: Gauss-Legendre panels that are narrow where it is steep.

A density cut at a bound is steep there on the scale of the next step and smooth elsewhere. When all steps
are of ordinary size the panels are equal; when one is tiny (a small trial in a large review) equal panels
would number millions, so they double in width with the distance from every cut.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import cache

import numpy as np

from treering.monitoring.checks import FloatArray

NODES = 16
PANEL_WIDTH = 6.0  # widest panel, in standard deviations of what varies there; good to 1e-13
_EQUAL_PANELS = 150
_TAIL_DECAY = 5.0  # widest panel of a normal tail, in lengths over which it falls by a factor e
_WINDOW_NODES = 40


@cache
def rule(count: int) -> tuple[FloatArray, FloatArray]:
    """Return Gauss-Legendre nodes and weights on [0, 1].

    Parameters
    ----------
    count : int
        Number of nodes.

    Returns
    -------
    (nodes, weights) : tuple of ndarray
    """
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return (nodes + 1.0) / 2.0, weights / 2.0


@cache
def _to_legendre() -> FloatArray:
    """Matrix from values at the nodes of a panel to coefficients of Legendre polynomials."""
    nodes, weights = rule(NODES)
    values = np.polynomial.legendre.legvander(2.0 * nodes - 1.0, NODES - 1)
    degrees = np.arange(NODES)
    matrix: FloatArray = (2.0 * degrees + 1.0)[:, None] * values.T * weights
    return matrix


def panel_edges(
    low: float, high: float, scale: float, cuts: Callable[[], list[tuple[float, float]]], spread: float
) -> FloatArray:
    """Return the ends of the panels over [low, high].

    Parameters
    ----------
    low, high : float
        Ends on the score scale.
    scale : float
        Standard deviation of the narrower of the two steps around the look.
    cuts : callable
        Gives where the density is steep and on which scale, as pairs; called only when needed.
    spread : float
        Standard deviation of the score, the widest scale there is.

    Returns
    -------
    ndarray, shape (panels + 1,)
    """
    count = max(1, math.ceil((high - low) / (PANEL_WIDTH * scale)))
    if count <= _EQUAL_PANELS:
        equal: FloatArray = low + (high - low) / count * np.arange(count + 1.0)
        return equal
    places = cuts()
    edges = np.unique([low, high, *(place for place, _ in places if low < place < high)])
    while True:
        left, right = edges[:-1], edges[1:]
        depth = np.maximum(np.abs(left), np.abs(right)) / spread
        allowed = spread * np.minimum(PANEL_WIDTH, _TAIL_DECAY / depth)
        for place, blur in places:
            distance = np.maximum(np.maximum(left - place, place - right), 0.0)
            allowed = np.minimum(allowed, np.maximum(PANEL_WIDTH * blur, distance))
        wide = right - left > allowed
        if not wide.any():
            return edges
        edges = np.sort(np.concatenate([edges, (left[wide] + right[wide]) / 2.0]))


def fill(left: FloatArray, width: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the nodes and weights of all panels, panel by panel.

    Parameters
    ----------
    left, width : ndarray, shape (p,)
        The panels.

    Returns
    -------
    (nodes, weights) : tuple of ndarray, shape (16 p,)
    """
    nodes, weights = rule(NODES)
    return (left[:, None] + width[:, None] * nodes).ravel(), (width[:, None] * weights).ravel()


def window(
    left: float, width: float, mass: FloatArray, low: FloatArray, high: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Sample the density of one panel anew within windows of it.

    Parameters
    ----------
    left, width : float
        The panel.
    mass : ndarray, shape (16,)
        Probability at its nodes.
    low, high : ndarray, shape (m,)
        Ends of the windows, inside the panel.

    Returns
    -------
    (nodes, mass) : tuple of ndarray, shape (m, 40)
        Score values and the probability at each.
    """
    coefficients = _to_legendre() @ (mass / (width * rule(NODES)[1]))
    share, weights = rule(_WINDOW_NODES)
    size = (high - low)[:, None]
    nodes = low[:, None] + size * share
    density = np.polynomial.legendre.legval(2.0 * (nodes - left) / width - 1.0, coefficients)
    return nodes, size * weights * density
