"""Bounds for Z at each look, and the next bound after looks that happened as they did."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray, check_alpha, check_sides, checked_increasing
from treering.monitoring.recursion import Paths, advance, start, tail, tail_bound
from treering.monitoring.spending import alpha_spent, spending_function, spending_parameter
from treering.terms import Spending


@dataclass(frozen=True, slots=True)
class Boundaries:
    """Efficacy bounds of a sequence of looks.

    Attributes
    ----------
    fractions : ndarray, shape (k,)
        Information fractions.
    z : ndarray, shape (k,)
        Bounds for Z (two-sided: for its absolute value); infinite where there is nothing to spend.
    nominal_p : ndarray, shape (k,)
        P value that meets the bound, two-sided when the plan is.
    alpha_spent : ndarray, shape (k,)
        Cumulative alpha spent, total over the tails.
    alpha : float
        Error rate of the plan.
    sides : int
        1 or 2.
    spending : Spending or None
        Spending function; None when the cumulative alpha was given as figures.
    parameter : float
        rho or gamma of the function; NaN when it has none.
    """

    fractions: FloatArray
    z: FloatArray
    nominal_p: FloatArray
    alpha_spent: FloatArray
    alpha: float
    sides: int
    spending: Spending | None
    parameter: float


@dataclass(frozen=True, slots=True)
class NextBoundary:
    """The bound of the look at hand, after earlier looks with the bounds they used.

    Attributes
    ----------
    z : float
        Bound for Z (two-sided: for its absolute value); infinite where there is nothing to spend.
    nominal_p : float
        P value that meets the bound, two-sided when the plan is.
    alpha_before : float
        Cumulative alpha spent by the earlier looks, computed from their informations and bounds.
    alpha_spent : float
        Cumulative alpha spent with this look.
    """

    z: float
    nominal_p: float
    alpha_before: float
    alpha_spent: float


def boundaries(
    fractions: ArrayLike,
    *,
    alpha: float = 0.05,
    sides: int = 2,
    spending: str = Spending.OBRIEN_FLEMING,
    parameter: float | None = None,
) -> Boundaries:
    """Return the bound for Z at each look so that alpha is spent as the function says.

    Parameters
    ----------
    fractions : array_like, shape (k,)
        Information fractions, increasing. All alpha left is spent at the first one of 1 or more; looks
        after it have an infinite bound.
    alpha : float
        Error rate, total over both tails when two-sided, in (0, 0.5).
    sides : {1, 2}
        1: a high Z crosses; 2: symmetric bounds, function applied to alpha/2 in each tail.
    spending : str or Spending
        "obrien-fleming", "pocock", "power-family" or "hwang-shih-decani".
    parameter : float, optional
        rho (power family, default 3) or gamma (Hwang, Shih and DeCani, default -4).

    Returns
    -------
    Boundaries

    Raises
    ------
    AnalysisError
        If the fractions do not increase or alpha, sides or the function cannot be used.

    References
    ----------
    Lan and DeMets 1983, Biometrika 70:659. Armitage, McPherson and Rowe 1969, JRSS A 132:235.
    """
    t = checked_increasing(fractions, "information fractions")
    allowed = alpha_spent(t, alpha=alpha, sides=sides, spending=spending, parameter=parameter)
    function = spending_function(spending)
    z = _bounds(t, np.diff(allowed, prepend=0.0), sides)
    shape = spending_parameter(function, parameter)
    return Boundaries(t, z, nominal_p(z, sides), allowed, alpha, sides, function, shape)


def boundaries_for_alpha(
    informations: ArrayLike, cumulative_alpha: ArrayLike, *, sides: int = 2
) -> Boundaries:
    """Return the bound for Z at each look for cumulative alpha given as figures.

    Parameters
    ----------
    informations : array_like, shape (k,)
        Information at each look, on any scale, increasing.
    cumulative_alpha : array_like, shape (k,)
        Alpha that may be spent up to each look, total over the tails, never falling, below 0.5.
    sides : {1, 2}
        Sides of the test.

    Returns
    -------
    Boundaries
        With `spending` None.

    Raises
    ------
    AnalysisError
        If the informations do not increase or the cumulative alpha falls or leaves [0, 0.5).
    """
    check_sides(sides)
    t = checked_increasing(informations, "informations")
    allowed = np.atleast_1d(np.asarray(cumulative_alpha, dtype=np.float64))
    steps = np.diff(allowed, prepend=0.0)
    if allowed.shape != t.shape or not np.all(steps >= 0.0) or not allowed[-1] < 0.5:
        raise AnalysisError(
            "The cumulative alpha cannot be spent over these looks.",
            found=allowed.tolist(),
            expected=f"{t.size} figures that never fall, from 0 or more to below 0.5",
            next_step="Alpha is never refunded: give the total spent up to each look.",
        )
    z = _bounds(t, steps, sides)
    return Boundaries(t, z, nominal_p(z, sides), allowed, float(allowed[-1]), sides, None, math.nan)


def next_boundary(
    informations: ArrayLike,
    used_bounds: ArrayLike,
    *,
    cumulative_alpha: float | None = None,
    alpha_increment: float | None = None,
    sides: int = 2,
) -> NextBoundary:
    """Return the bound of the look at hand, with the bounds of earlier looks as they were used.

    Parameters
    ----------
    informations : array_like, shape (m + 1,)
        Information at the m earlier looks that spent and at the look at hand, on any scale, increasing.
    used_bounds : array_like, shape (m,)
        Bounds the earlier looks used; infinity for one without a bound.
    cumulative_alpha : float, optional
        Alpha that may be spent up to now, total over the tails. Give this or `alpha_increment`.
    alpha_increment : float, optional
        Alpha that may be spent at this look, total over the tails.
    sides : {1, 2}
        Sides of the test.

    Returns
    -------
    NextBoundary
        With an infinite bound when earlier looks have spent what is allowed by now.

    Raises
    ------
    AnalysisError
        If the informations do not increase, the lengths do not fit, a bound is not a number or not
        exactly one of the two alphas is given.
    """
    check_sides(sides)
    info = checked_increasing(informations, "informations")
    used = np.asarray(used_bounds, dtype=np.float64).reshape(-1)
    _check_used(info, used, cumulative_alpha, alpha_increment)
    scale = info[-1]
    paths, before = start(), 0.0
    for look, (now, after) in enumerate(zip(info[:-1] / scale, info[1:] / scale, strict=True)):
        if math.isinf(used[look]):
            continue
        score = used[look] * math.sqrt(now)
        before += sides * tail(paths, now, score)
        paths = advance(paths, now, [_inside(score, sides)], after)
    step = alpha_increment if alpha_increment is not None else (cumulative_alpha or 0.0) - before
    z = tail_bound(paths, 1.0, max(step, 0.0) / sides)
    spent = before if math.isinf(z) else before + sides * tail(paths, 1.0, z)
    return NextBoundary(z, float(nominal_p(np.array([z]), sides)[0]), before, spent)


def nominal_p(z: FloatArray, sides: int) -> FloatArray:
    """Return the P value of a single test that has each Z.

    Parameters
    ----------
    z : ndarray
        Z values.
    sides : {1, 2}
        Sides of the test; two-sided takes the absolute value.

    Returns
    -------
    ndarray
    """
    tails: FloatArray = sides * special.ndtr(-(np.abs(z) if sides == 2 else z))
    return tails


def _inside(score: float, sides: int) -> tuple[float, float]:
    """Return the scores at which a path goes on."""
    return (-score if sides == 2 else -math.inf, score)


def _bounds(t: FloatArray, steps: FloatArray, sides: int) -> FloatArray:
    """Solve look by look for the bound that spends the step of alpha."""
    z = np.full(t.size, np.inf)
    paths: Paths = start()
    spending_looks = [look for look in range(t.size) if steps[look] > 0.0]
    for look, following in zip(spending_looks, [*spending_looks[1:], None], strict=False):
        score = tail_bound(paths, t[look], steps[look] / sides)
        z[look] = score / math.sqrt(t[look])
        if following is not None and math.isfinite(score):
            paths = advance(paths, t[look], [_inside(score, sides)], t[following])
    return z


def _check_used(info: FloatArray, used: FloatArray, *alphas: float | None) -> None:
    """Refuse earlier looks and an allowance that do not fit together."""
    given: Sequence[float] = [alpha for alpha in alphas if alpha is not None]
    if used.size != info.size - 1 or np.any(np.isnan(used)) or np.any(used == -np.inf):
        raise AnalysisError(
            "The bounds of the earlier looks do not fit their informations.",
            found=f"{info.size} informations, bounds {used.tolist()}",
            expected="one bound for each look before the one at hand",
            next_step="Give the looks that spent alpha, as the ledger holds them, then the information now.",
        )
    if len(given) != 1 or not given[0] >= 0.0:
        raise AnalysisError(
            "What this look may spend is not stated once.",
            found=list(alphas),
            expected="either cumulative_alpha or alpha_increment, 0 or more",
            next_step="Give the cumulative alpha that the spending function allows at this fraction.",
        )
    check_alpha(max(given[0], 1e-300), "alpha allowed by now")
