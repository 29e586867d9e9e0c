"""Non-binding futility bounds by beta spending, and what they cost in information.

The efficacy bounds are computed as if nobody ever stopped for futility, so a panel may pass over a
futility bound without raising the chance of a false alarm. One-sided: a Z below the bound. Two-sided: an
absolute Z below it (inner wedge).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize, special

from treering.errors import AnalysisError
from treering.monitoring.boundaries import boundaries
from treering.monitoring.checks import FloatArray, check_power, check_sides, checked_increasing
from treering.monitoring.crossing import between, inside
from treering.monitoring.recursion import Paths, advance, mirrored, start, tail, tail_bound
from treering.monitoring.spending import beta_spent
from treering.terms import Spending


@dataclass(frozen=True, slots=True)
class FutilityBoundaries:
    """Futility bounds of a sequence of looks.

    Attributes
    ----------
    fractions : ndarray, shape (k,)
        Information fractions.
    z : ndarray, shape (k,)
        Stop for futility when Z (two-sided: its absolute value) is below; minus infinity where there is
        no bound, which is at looks after the first fraction of 1 or more.
    efficacy_z : ndarray, shape (k,)
        Efficacy bounds that go with them.
    beta_spent : ndarray, shape (k,)
        Cumulative chance, under the effect to detect, of a futility stop.
    drift : float
        Mean of Z at fraction 1 under the effect to detect.
    inflation : float
        Required information with these futility looks over that of one final test. The power counts a
        crossing on either side, the single test's formula on one, so a single look can stand at 0.9997.
    """

    fractions: FloatArray
    z: FloatArray
    efficacy_z: FloatArray
    beta_spent: FloatArray
    drift: float
    inflation: float


def futility_boundaries(
    fractions: ArrayLike,
    *,
    alpha: float = 0.05,
    beta: float = 0.1,
    sides: int = 2,
    spending: str = Spending.OBRIEN_FLEMING,
    parameter: float | None = None,
    beta_spending: str = Spending.OBRIEN_FLEMING,
    beta_parameter: float | None = None,
) -> FutilityBoundaries:
    """Return non-binding futility bounds and the drift at which the power is one minus beta.

    Parameters
    ----------
    fractions : array_like, shape (k,)
        Information fractions, increasing. When the last is below 1, a final look at 1 is planned behind
        it: it sets the drift and is not returned.
    alpha, sides, spending, parameter
        Efficacy plan as in `boundaries`.
    beta : float
        Chance, under the effect to detect, to end without an efficacy crossing.
    beta_spending, beta_parameter
        Spending function of beta.

    Returns
    -------
    FutilityBoundaries
        At the first look with fraction 1 or more the futility bound is the efficacy bound.

    Raises
    ------
    AnalysisError
        If the plan cannot be used or the power is not above alpha.

    References
    ----------
    Pampallona, Tsiatis and Kim 2001, Drug Information Journal 35:1113.
    """
    t = checked_increasing(fractions, "information fractions")
    efficacy = boundaries(t, alpha=alpha, sides=sides, spending=spending, parameter=parameter).z
    check_power(1.0 - beta, alpha)
    final = int(np.argmax(t >= 1.0)) + 1 if t[-1] >= 1.0 else t.size + 1
    planned = t[:final] if final <= t.size else np.append(t, 1.0)
    bounds = boundaries(planned, alpha=alpha, sides=sides, spending=spending, parameter=parameter).z
    allowed = beta_spent(planned, beta=beta, spending=beta_spending, parameter=beta_parameter)
    drift = _drift(planned, bounds, allowed, alpha, sides)
    z = np.full(t.size, -np.inf)
    kept = min(final, t.size)
    z[:kept] = _wedge(planned, bounds, allowed, drift, sides)[0][:kept]
    spent = np.full(t.size, beta)
    spent[:kept] = allowed[:kept]
    single = -float(special.ndtri(alpha / sides) + special.ndtri(beta))
    return FutilityBoundaries(t, z, efficacy, spent, drift, (drift / single) ** 2)


def next_futility_bound(
    informations: ArrayLike,
    efficacy_bounds: ArrayLike,
    used_futility: ArrayLike,
    *,
    cumulative_beta: float,
    drift: float,
    sides: int = 2,
) -> float:
    """Return the futility bound of the look at hand, with earlier bounds as they were used.

    Parameters
    ----------
    informations : array_like, shape (m + 1,)
        Information at the earlier looks and at the one at hand, increasing.
    efficacy_bounds : array_like, shape (m + 1,)
        Efficacy bounds of these looks; infinite for one without.
    used_futility : array_like, shape (m,)
        Futility bounds the earlier looks used; minus infinity for one without.
    cumulative_beta : float
        Beta that may be spent up to now.
    drift : float
        Effect to detect as the mean of Z over the root of the information, above 0.
    sides : {1, 2}
        Sides of the test.

    Returns
    -------
    float
        Never above the efficacy bound; minus infinity when earlier looks have spent what is allowed.

    Raises
    ------
    AnalysisError
        If the looks do not increase or the bounds do not fit them.
    """
    check_sides(sides)
    t = checked_increasing(informations, "informations")
    upper = np.asarray(efficacy_bounds, dtype=np.float64).reshape(-1)
    used = np.asarray(used_futility, dtype=np.float64).reshape(-1)
    if upper.size != t.size or used.size != t.size - 1 or np.any(np.isnan(upper)) or np.any(np.isnan(used)):
        raise AnalysisError(
            "The bounds do not fit the looks.",
            found=f"{t.size} informations, {upper.size} efficacy bounds, {used.size} used futility bounds",
            expected="one efficacy bound for each look and one futility bound for each look before this one",
            next_step="Give the looks as the ledger holds them, then the one at hand.",
        )
    paths, before = start(), 0.0
    for k in range(t.size - 1):
        root = math.sqrt(t[k])
        before += _stopped(paths, t[k], used[k] * root, drift, sides)
        paths = _onward(paths, t[k], upper[k] * root, used[k] * root, t[k + 1], drift, sides)
    root = math.sqrt(t[-1])
    step = cumulative_beta - before
    return _futility_score(paths, t[-1], upper[-1] * root, step, drift, sides) / root


def _drift(t: FloatArray, bounds: FloatArray, allowed: FloatArray, alpha: float, sides: int) -> float:
    """Solve for the drift at which the last look leaves exactly its share of beta."""
    beta = float(allowed[-1])
    single = -float(special.ndtri(alpha / sides) + special.ndtri(beta))

    def surplus(drift: float) -> float:
        return _wedge(t, bounds, allowed, drift, sides)[1] - beta

    high = 1.5 * single / math.sqrt(t[-1])
    while surplus(high) > 0.0:
        high *= 1.5
    low = high / 2.0
    while surplus(low) < 0.0:
        low /= 2.0
    return float(optimize.brentq(surplus, low, high, xtol=1e-12, rtol=1e-13))


def _wedge(
    t: FloatArray, bounds: FloatArray, allowed: FloatArray, drift: float, sides: int
) -> tuple[FloatArray, float]:
    """Return the futility bounds at this drift and the chance to end without an efficacy crossing."""
    z = np.empty(t.size)
    paths, missed = start(), 0.0
    for k in range(t.size):
        root = math.sqrt(t[k])
        upper = bounds[k] * root
        last = k == t.size - 1
        step = allowed[k] - missed
        score = upper if last else _futility_score(paths, t[k], upper, step, drift, sides)
        missed += _stopped(paths, t[k], score, drift, sides)
        z[k] = bounds[k] if last else score / root
        if not last:
            paths = _onward(paths, t[k], upper, score, t[k + 1], drift, sides)
    return z, missed


def _stopped(paths: Paths, information: float, score: float, drift: float, sides: int) -> float:
    """Chance of a futility stop at the next look with this bound."""
    if sides == 2:
        return between(paths, information, score, drift=drift)
    return tail(mirrored(paths), information, -score, drift=-drift)


def _onward(
    paths: Paths, information: float, upper: float, score: float, following: float, drift: float, sides: int
) -> Paths:
    """Carry on the paths between the futility and the efficacy bound."""
    regions = inside(-upper, upper, score) if sides == 2 else [(score, upper)]
    return advance(paths, information, regions, following, drift=drift)


def _futility_score(
    paths: Paths, information: float, upper: float, step: float, drift: float, sides: int
) -> float:
    """Return the futility bound on the score scale that spends `step` of beta, capped at efficacy."""
    if step <= 0.0:
        return -math.inf
    ceiling = min(upper, (drift * math.sqrt(information) + 37.0) * math.sqrt(information))
    if _stopped(paths, information, ceiling, drift, sides) <= step:
        return upper
    if sides == 1:
        return -tail_bound(mirrored(paths), information, step, drift=-drift)

    def surplus(score: float) -> float:
        return between(paths, information, score, drift=drift) - step

    return float(optimize.brentq(surplus, 0.0, ceiling, xtol=1e-14, rtol=1e-13))
