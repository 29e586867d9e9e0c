"""What may be said at a look: stage-wise P, estimate and intervals, conditional and predictive power."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize, special

from treering.errors import AnalysisError
from treering.monitoring.checks import (
    FloatArray,
    check_alpha,
    check_positive,
    check_sides,
    checked_increasing,
)
from treering.monitoring.crossing import Crossing, crossing_probabilities


@dataclass(frozen=True, slots=True)
class StagewiseEstimate:
    """Median-unbiased estimate with its interval, by the stage-wise ordering.

    Attributes
    ----------
    estimate, low, high : float
        On the analysis scale when the informations are; in units of the drift for fractions.
    level : float
        Level of the interval.
    """

    estimate: float
    low: float
    high: float
    level: float


def stagewise_p(fractions: ArrayLike, bounds: ArrayLike, look: int, z: float, *, sides: int = 2) -> float:
    """Return the P value of a result at a look, adjusted for the looks before it.

    More extreme is a crossing at an earlier look, or a Z at this look that is as far out (two-sided: in
    absolute value). At a bound it equals the alpha spent; at the first look it is the ordinary P value.

    Parameters
    ----------
    fractions : array_like, shape (k,)
        Information fractions or informations of the looks, increasing.
    bounds : array_like, shape (k,)
        Bounds for Z the looks used; those from `look` on do not matter.
    look : int
        Number of the look at hand, the first is 1.
    z : float
        Z at that look.
    sides : {1, 2}
        Sides of the test.

    Returns
    -------
    float

    Raises
    ------
    AnalysisError
        If the looks, their bounds or Z cannot be used.

    References
    ----------
    Tsiatis, Rosner and Mehta 1984, Biometrics 40:797.
    """
    t, upper = _up_to(fractions, bounds, look, z, sides)
    upper[-1] = abs(z) if sides == 2 else z
    lower = -upper if sides == 2 else None
    return min(1.0, crossing_probabilities(t, upper, lower=lower).total)


def median_unbiased(
    informations: ArrayLike, bounds: ArrayLike, look: int, z: float, *, sides: int = 2, level: float = 0.95
) -> StagewiseEstimate:
    """Return the median-unbiased estimate and interval of a monitoring that ended at this look.

    Parameters
    ----------
    informations : array_like, shape (k,)
        Information at each look, increasing; the estimate is on the scale it belongs to.
    bounds : array_like, shape (k,)
        Bounds for Z the looks used; those from `look` on do not matter.
    look : int
        Number of the look at hand, the first is 1.
    z : float
        Z at that look.
    sides : {1, 2}
        Sides of the test.
    level : float
        Level of the interval, above 0.5 and below 1.

    Returns
    -------
    StagewiseEstimate

    Raises
    ------
    AnalysisError
        If the looks, their bounds, Z or the level cannot be used.

    References
    ----------
    Tsiatis, Rosner and Mehta 1984, Biometrics 40:797. Jennison and Turnbull 2000, section 8.4-8.5.
    """
    check_alpha(1.0 - level, "1 - level")
    info, upper = _up_to(informations, bounds, look, z, sides)
    lower = -upper if sides == 2 else np.full(upper.size, -np.inf)
    upper[-1], lower[-1] = z, -np.inf
    root = math.sqrt(info[-1])

    def effect_at(chance: float) -> float:
        def surplus(drift: float) -> float:
            return _as_high(crossing_probabilities(info, upper, lower=lower, drift=drift)) - chance

        low, high = _bracket(surplus, z / root, 1.0 / root)
        return float(optimize.brentq(surplus, low, high, xtol=1e-12 / root, rtol=1e-12))

    tail = (1.0 - level) / 2.0
    return StagewiseEstimate(effect_at(0.5), effect_at(tail), effect_at(1.0 - tail), level)


def repeated_interval(estimate: float, standard_error: float, critical_z: float) -> tuple[float, float]:
    """Return the repeated confidence interval at a look.

    Parameters
    ----------
    estimate, standard_error : float
        Pooled estimate and its standard error on the analysis scale.
    critical_z : float
        Bound of the look; infinite where there is none.

    Returns
    -------
    (low, high) : tuple of float
        Estimate plus and minus the bound times the standard error; the intervals of all looks together
        cover with the level of a two-sided plan.

    Raises
    ------
    AnalysisError
        If the standard error is not above 0.

    References
    ----------
    Jennison and Turnbull 1989, Journal of the Royal Statistical Society B 51:305.
    """
    check_positive(standard_error, "standard error")
    return estimate - critical_z * standard_error, estimate + critical_z * standard_error


def conditional_power(z: float, fraction: float, *, critical_z: float, drift: float) -> float:
    """Return the chance that Z at full information exceeds a critical value, given Z now.

    Parameters
    ----------
    z : float
        Z now, turned so that benefit is positive.
    fraction : float
        Information fraction now, in [0, 1).
    critical_z : float
        Critical value at fraction 1.
    drift : float
        Mean of Z at fraction 1 that the rest of the information follows: 0 for no effect,
        `trend_drift(z, fraction)` for what was seen so far, `detection_constant(...)` for the design.

    Returns
    -------
    float

    Raises
    ------
    AnalysisError
        If the fraction is not in [0, 1).

    References
    ----------
    Lan and Wittes 1988, Biometrics 44:579.
    """
    _check_open_fraction(fraction)
    brownian = z * math.sqrt(fraction)
    left = 1.0 - fraction
    return float(special.ndtr((brownian + drift * left - critical_z) / math.sqrt(left)))


def trend_drift(z: float, fraction: float) -> float:
    """Return the drift at fraction 1 that the result so far points to.

    Parameters
    ----------
    z : float
        Z now.
    fraction : float
        Information fraction now, above 0.

    Returns
    -------
    float
        z / sqrt(fraction).

    Raises
    ------
    AnalysisError
        If the fraction is not above 0.
    """
    check_positive(fraction, "information fraction")
    return z / math.sqrt(fraction)


def predictive_power(
    z: float,
    fraction: float,
    *,
    critical_z: float,
    prior_drift: float = 0.0,
    prior_sd: float = math.inf,
) -> float:
    """Return the conditional power averaged over what is known of the effect.

    Parameters
    ----------
    z : float
        Z now, turned so that benefit is positive.
    fraction : float
        Information fraction now, in (0, 1); 0 is allowed with a proper prior.
    critical_z : float
        Critical value at fraction 1.
    prior_drift, prior_sd : float
        Normal prior of the drift (mean of Z at fraction 1); flat by default.

    Returns
    -------
    float

    Raises
    ------
    AnalysisError
        If the fraction or the prior cannot be used.

    References
    ----------
    Spiegelhalter, Freedman and Blackburn 1986, Controlled Clinical Trials 7:8.
    """
    _check_open_fraction(fraction)
    precision = fraction + (0.0 if math.isinf(prior_sd) else prior_sd**-2)
    if not (prior_sd > 0.0 and precision > 0.0):
        raise AnalysisError(
            "Without information a flat prior has no predictive power.",
            found=f"fraction {fraction}, prior SD {prior_sd}",
            expected="a fraction above 0, or a finite prior SD above 0",
            next_step="Wait for the first trial or state a prior in the protocol.",
        )
    brownian = z * math.sqrt(fraction)
    weighted = brownian + (0.0 if math.isinf(prior_sd) else prior_drift * prior_sd**-2)
    left = 1.0 - fraction
    mean = brownian + left * weighted / precision
    return float(special.ndtr((mean - critical_z) / math.sqrt(left + left**2 / precision)))


def _up_to(
    fractions: ArrayLike, bounds: ArrayLike, look: int, z: float, sides: int
) -> tuple[FloatArray, FloatArray]:
    """Return informations and a copy of the bounds up to the look, or refuse."""
    check_sides(sides)
    t = checked_increasing(fractions, "information fractions")
    upper = np.atleast_1d(np.asarray(bounds, dtype=np.float64))
    if not 1 <= look <= t.size or upper.ndim != 1 or upper.size < look - 1 or not math.isfinite(z):
        raise AnalysisError(
            "There is no such look, or it has no Z.",
            found=f"look {look} of {t.size}, {upper.size} bounds, Z {z}",
            expected="a look from 1 to the number of fractions, bounds for the looks before it, a finite Z",
            next_step="Number looks from 1 and give the bounds as the ledger holds them.",
        )
    return t[:look], np.append(upper[: look - 1], 0.0)


def _as_high(crossing: Crossing) -> float:
    """Chance of a result at least as high in the stage-wise ordering (the last upper bound is Z)."""
    return float(crossing.upper.sum())


def _bracket(surplus: Callable[[float], float], centre: float, width: float) -> tuple[float, float]:
    """Widen around the ordinary estimate until the rising function changes sign."""
    low, high = centre - width, centre + width
    while surplus(low) > 0.0:
        low -= width
    while surplus(high) < 0.0:
        high += width
    return low, high


def _check_open_fraction(fraction: float) -> None:
    """Refuse a fraction at which nothing is left to come."""
    if not 0.0 <= fraction < 1.0:
        raise AnalysisError(
            "There is no conditional or predictive power at this information fraction.",
            found=fraction,
            expected="0 <= fraction < 1",
            next_step="From fraction 1 on read the verdict of the look itself.",
        )
