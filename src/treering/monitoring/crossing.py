"""Chance to leave at each look, for any bounds and any true effect."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray, check_positive, check_sides, checked_increasing
from treering.monitoring.recursion import Paths, advance, mirrored, start, tail


@dataclass(frozen=True, slots=True)
class Crossing:
    """Chance of the first exit at each look, by the bound it is through.

    Attributes
    ----------
    upper, lower, inner : ndarray, shape (k,)
        Chance to leave at this look and not before: above, below, or inside the futility wedge.
    """

    upper: FloatArray
    lower: FloatArray
    inner: FloatArray

    @property
    def total(self) -> float:
        """Chance to leave at any look through any bound."""
        return float(self.upper.sum() + self.lower.sum() + self.inner.sum())


def crossing_probabilities(
    informations: ArrayLike,
    upper: ArrayLike,
    *,
    lower: ArrayLike | None = None,
    inner: ArrayLike | None = None,
    drift: float = 0.0,
) -> Crossing:
    """Return the chance of the first exit at each look.

    Parameters
    ----------
    informations : array_like, shape (k,)
        Information at each look, increasing; fractions when `drift` is the mean of Z at fraction 1.
    upper : array_like, shape (k,)
        Bounds for Z above; infinite where there is none.
    lower : array_like, shape (k,), optional
        Bounds for Z below (none by default; `-upper` for a symmetric two-sided plan).
    inner : array_like, shape (k,), optional
        Half-widths of a futility wedge around Z = 0; 0 or below where there is none.
    drift : float
        The mean of Z is `drift` times the root of the information: the true effect for information on
        its own scale, the mean of Z at full information for fractions.

    Returns
    -------
    Crossing

    Raises
    ------
    AnalysisError
        If the informations do not increase or the bounds do not fit them.

    References
    ----------
    Armitage, McPherson and Rowe 1969, Journal of the Royal Statistical Society A 132:235.
    """
    t = checked_increasing(informations, "informations")
    high = _bounds_of(upper, t, math.inf)
    low = _bounds_of(lower, t, -math.inf)
    half = _bounds_of(inner, t, -math.inf)
    out = Crossing(np.zeros(t.size), np.zeros(t.size), np.zeros(t.size))
    active = [k for k in range(t.size) if high[k] < np.inf or low[k] > -np.inf or half[k] > 0.0]
    paths = start()
    for k, following in zip(active, [*active[1:], None], strict=False):
        root = math.sqrt(t[k])
        out.upper[k] = tail(paths, t[k], high[k] * root, drift=drift)
        out.lower[k] = tail(mirrored(paths), t[k], -low[k] * root, drift=-drift)
        out.inner[k] = between(paths, t[k], half[k] * root, drift=drift)
        if following is not None:
            regions = inside(low[k] * root, high[k] * root, half[k] * root)
            paths = advance(paths, t[k], regions, t[following], drift=drift)
    return out


def conditional_crossing(
    z: float, information: float, informations: ArrayLike, upper: ArrayLike, *, drift: float, sides: int = 2
) -> Crossing:
    """Return the chance of the first crossing at each look to come, given Z now.

    Parameters
    ----------
    z : float
        Z now; it has not crossed, or its crossing is set aside.
    information : float
        Information now, above 0.
    informations : array_like, shape (k,)
        Information at each look to come, increasing and above `information`.
    upper : array_like, shape (k,)
        Bounds of these looks; infinite where there is none.
    drift : float
        True effect from now on: the mean of Z is `drift` times the root of the information (on
        fractions, the mean of Z at fraction 1).
    sides : {1, 2}
        2 counts crossings below minus the bound as `lower`.

    Returns
    -------
    Crossing

    Raises
    ------
    AnalysisError
        If the looks do not come after now or the bounds do not fit them.

    References
    ----------
    Lan and Wittes 1988, Biometrics 44:579, for several looks.
    """
    check_sides(sides)
    check_positive(information, "information now")
    t = checked_increasing(informations, "informations to come")
    bounds = _bounds_of(upper, t, math.inf)
    if not math.isfinite(z) or t[0] <= information:
        raise AnalysisError(
            "The looks to come do not follow from now.",
            found=f"Z {z} at information {information}, next look at {t[0]}",
            expected="a finite Z now and a next look with more information",
            next_step="Give only looks that are still to come.",
        )
    score, more = z * math.sqrt(information), t - information
    above = (bounds * np.sqrt(t) - score) / np.sqrt(more)
    below = (-bounds * np.sqrt(t) - score) / np.sqrt(more) if sides == 2 else None
    return crossing_probabilities(more, above, lower=below, drift=drift)


def between(paths: Paths, information: float, half_width: float, *, drift: float = 0.0) -> float:
    """Return the chance to be still inside now and within `half_width` of score 0 at the next look.

    Parameters
    ----------
    paths : Paths
        Paths inside so far.
    information : float
        Information at the next look.
    half_width : float
        Half the width of the wedge on the score scale; 0 or below gives 0.
    drift : float
        Mean of the score per unit of information.

    Returns
    -------
    float
    """
    if half_width <= 0.0:
        return 0.0
    above = tail(paths, information, -half_width, drift=drift)
    return above - tail(paths, information, half_width, drift=drift)


def inside(low: float, high: float, half_width: float) -> list[tuple[float, float]]:
    """Return the score intervals in which a path goes on.

    Parameters
    ----------
    low, high : float
        Outer bounds on the score scale, infinite where there is none.
    half_width : float
        Half the width of the futility wedge; 0 or below where there is none.

    Returns
    -------
    list of (low, high)
    """
    if half_width <= 0.0:
        return [(low, high)]
    return [(low, -half_width), (half_width, high)]


def _bounds_of(bounds: ArrayLike | None, t: FloatArray, absent: float) -> FloatArray:
    """Return one bound per look, or refuse."""
    if bounds is None:
        return np.full(t.size, absent)
    vector = np.atleast_1d(np.asarray(bounds, dtype=np.float64))
    if vector.shape != t.shape or np.any(np.isnan(vector)):
        raise AnalysisError(
            "The bounds do not fit the looks.",
            found=vector.tolist(),
            expected=f"{t.size} bounds, infinite where a look has none",
            next_step="Give one bound for each look.",
        )
    return vector
