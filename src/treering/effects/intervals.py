"""Checks of a reported interval: it has a width, holds its estimate and is symmetric where it is analysed."""

from __future__ import annotations

import numpy as np

from treering.effects import checks
from treering.effects.rows import BoolArray, FloatArray, IntArray, Rows, refuse

# How far rounding may have moved the middle of an interval, as a share of its half-width (own rule). Beyond
# half of it the printed digits are too coarse to yield a standard error. Ratios are customarily printed with
# two decimals (common practice, no source); with fewer, a fault is likelier than such a chance of rounding.
COARSEST, COARSEST_RATIO = 0.5, 0.25
# The same for an estimate printed with fewer decimals than its limits, 0.67 (0.455 to 0.983), and for ratios
# printed to two significant digits, 1.1 (0.93 to 1.3).
COARSEST_ESTIMATE = 0.1
_FLOAT_NOISE = 1e-6
_MOST_DECIMALS = 12


def check_interval(rows: Rows, *, log_scale: bool) -> None:
    """Refuse an interval that has no width, misses its estimate or is lopsided where it is analysed.

    An interval taken as the estimate plus and minus a multiple of its standard error is symmetric on the
    scale of the analysis. Printed figures are rounded, so a gap between the estimate and the middle of the
    limits is accepted if rounding of the printed digits can explain it and it stays within half of the
    half-width, or a quarter for a ratio printed with fewer than two decimals or to three significant digits,
    or a tenth if it takes an estimate with fewer decimals than its limits, or two significant digits.

    Parameters
    ----------
    rows : Rows
        With ``estimate``, ``ci_low``, ``ci_high`` on the natural scale and ``ci_level``.
    log_scale : bool
        Whether the analysis is on the log scale.
    """
    estimate, low, high = rows["estimate"], rows["ci_low"], rows["ci_high"]
    level = rows["ci_level"]
    outside_level = (level <= 0) | (level >= 1)
    refuse(outside_level, rows.labels, "ci_level", level, "is no confidence level", "a value such as 0.95")
    if log_scale:
        checks.positive(rows, "estimate", "ci_low")
    refuse(
        low >= high, rows.labels, "ci_low", low, "is not below ci_high", "a lower limit below the upper one"
    )
    outside = (estimate < low) | (estimate > high)

    def shown(at: int) -> str:
        return f"{estimate[at]:g} ({low[at]:g} to {high[at]:g})"

    refuse(
        outside, rows.labels, "estimate", shown, "lies outside its interval", "ci_low <= estimate <= ci_high"
    )
    skewed = ~_symmetric(estimate, low, high, log_scale=log_scale)
    scale = "log scale" if log_scale else "analysis scale"
    refuse(
        skewed,
        rows.labels,
        "ci_low, ci_high",
        shown,
        f"the interval is not symmetric about the estimate on the {scale}, beyond what rounding explains",
        "an interval of the form estimate plus and minus a multiple of its standard error",
    )


def _symmetric(estimate: FloatArray, low: FloatArray, high: FloatArray, *, log_scale: bool) -> BoolArray:
    """Whether some unrounded figures behind the printed ones make the interval symmetric."""

    def scale(x: FloatArray) -> FloatArray:
        return np.log(x) if log_scale else x

    gap = np.abs(scale(estimate) - (scale(low) + scale(high)) / 2)
    width = (scale(high) - scale(low)) / 2
    # All three figures at the very edge of their rounding is no explanation: 1 (0 to 4) cannot come of it.
    edge = _FLOAT_NOISE * width

    def explained(decimals: tuple[IntArray, ...], coarsest: FloatArray | float) -> BoolArray:
        reach, down, up = (_half_unit(number) for number in decimals)
        middle_low = (scale(low - down) + scale(high - up)) / 2
        middle_high = (scale(low + down) + scale(high + up)) / 2
        meets = (scale(estimate - reach) < middle_high - edge) & (scale(estimate + reach) > middle_low + edge)
        return np.asarray(meets & (gap <= coarsest * width))

    # A ratio below 10 has a decimal at least; 2 (1 to 5) is no rounding to integers.
    fewest = np.where((estimate < 10) & log_scale, 1, 0)
    own = np.maximum(printed_decimals(estimate), fewest)
    limits = np.maximum(np.maximum(printed_decimals(low), printed_decimals(high)), fewest)
    coarsest = np.where((limits < 2) & log_scale, COARSEST_RATIO, COARSEST)
    found = gap <= edge
    found |= explained((np.maximum(limits, own), limits, limits), coarsest)
    found |= explained((own, limits, limits), COARSEST_ESTIMATE)
    if log_scale:
        digits, decimals = _significant(estimate, low, high)
        found |= explained(decimals, np.where(digits < 3, COARSEST_ESTIMATE, COARSEST_RATIO)) & (digits > 1)
    return found


def _significant(*figures: FloatArray) -> tuple[IntArray, tuple[IntArray, ...]]:
    """Most significant digits among positive figures, and the decimals that each has with that many."""
    leading = [np.floor(np.log10(x)).astype(int) + 1 for x in figures]
    printed = [printed_decimals(x) + places for x, places in zip(figures, leading, strict=True)]
    digits = np.maximum.reduce(printed)
    return digits, tuple(np.minimum(digits - places, _MOST_DECIMALS) for places in leading)


def printed_decimals(values: FloatArray) -> IntArray:
    """Count the decimals a value was printed with, trailing zeros not counted (0.70 gives 1).

    Parameters
    ----------
    values : ndarray, shape (k,)
        Figures as printed.

    Returns
    -------
    ndarray of int, shape (k,)
        0 to 12; 12 stands for a figure that was not rounded.
    """
    found = np.full(values.shape, _MOST_DECIMALS)
    for decimals in range(_MOST_DECIMALS - 1, -1, -1):
        with np.errstate(over="ignore", invalid="ignore"):
            scaled = values * 10.0**decimals
            near = np.abs(scaled - np.round(scaled)) <= 1e-12 * np.abs(scaled)
        found = np.where(near, decimals, found)
    return found


def _half_unit(decimals: IntArray) -> FloatArray:
    """Half a unit of the last printed decimal; zero for unrounded figures."""
    return np.where(decimals >= _MOST_DECIMALS, 0.0, 0.5 * 10.0 ** (-decimals.astype(float)))
