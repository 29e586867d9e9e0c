"""Checks of what a trial reports, before any formula sees it.

Every function takes rows and raises an ``AnalysisError`` that names the first faulty trial and the field.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from treering.effects.rows import BoolArray, FloatArray, IntArray, Rows, TextArray, refuse
from treering.errors import AnalysisError
from treering.terms import Correction

ARMS = ("intervention", "comparator")

# Where rounding would have to move the middle of an interval by more than this share of its half-width,
# the printed digits are too coarse to yield a standard error, even if rounding could explain the gap.
COARSEST = 0.25
_FLOAT_NOISE = 1e-6
_MOST_DECIMALS = 12


def trial_labels(table: pd.DataFrame) -> TextArray:
    """Labels for messages: the column ``trial`` if the index holds only numbers, else the index."""
    if "trial" in table.columns and pd.api.types.is_integer_dtype(table.index.dtype):
        return np.asarray(table["trial"].to_numpy(), dtype=object)
    labels = np.empty(len(table), dtype=object)
    labels[:] = list(table.index)
    return labels


def read_numbers(table: pd.DataFrame, field: str, labels: TextArray) -> FloatArray:
    """Read one column as floats; a missing entry becomes NaN.

    Raises
    ------
    AnalysisError
        If the column stands twice in the table, or an entry is not a finite number.
    """
    column = table[field]
    if isinstance(column, pd.DataFrame):
        raise AnalysisError(f"{field}: the column stands more than once in the table.")
    numbers = np.asarray(pd.to_numeric(column, errors="coerce").to_numpy(dtype=float, na_value=np.nan))
    raw = column.to_numpy(dtype=object)
    missing = np.asarray(column.isna().to_numpy(), dtype=bool)
    refuse(np.isnan(numbers) & ~missing, labels, field, raw, "is not a number", "a plain number")
    refuse(np.isinf(numbers), labels, field, raw, "is not finite", "a finite number")
    return numbers


def counts(rows: Rows) -> None:
    """Refuse counts other than totals above zero, events from zero to the total, in both arms."""
    for arm in ARMS:
        total, events = rows[f"{arm}_total"], rows[f"{arm}_events"]
        refuse(
            total <= 0, rows.labels, f"{arm}_total", total, "is not above zero", "at least one participant"
        )
        refuse(events < 0, rows.labels, f"{arm}_events", events, "is below zero", "0 or more")
        above = events > total
        refuse(above, rows.labels, f"{arm}_events", events, f"is above {arm}_total", "at most the total")


def person_time(rows: Rows) -> None:
    """Refuse rates other than events from zero and person-time above zero, in both arms."""
    for arm in ARMS:
        events, time = rows[f"{arm}_events"], rows[f"{arm}_time"]
        refuse(events < 0, rows.labels, f"{arm}_events", events, "is below zero", "0 or more")
        refuse(time <= 0, rows.labels, f"{arm}_time", time, "is not above zero", "person-time above zero")


def means(rows: Rows) -> None:
    """Refuse arms other than totals that admit an SD, SDs from zero, and not both SDs zero."""
    for arm in ARMS:
        total, sd = rows[f"{arm}_total"], rows[f"{arm}_sd"]
        refuse(
            total <= 0, rows.labels, f"{arm}_total", total, "is not above zero", "at least two participants"
        )
        refuse(total <= 1, rows.labels, f"{arm}_total", total, "admits no SD", "at least two participants")
        refuse(sd < 0, rows.labels, f"{arm}_sd", sd, "is below zero", "an SD above zero")
    both = (rows["intervention_sd"] == 0) & (rows["comparator_sd"] == 0)
    refuse(
        both, rows.labels, "intervention_sd", np.zeros(both.shape), "is zero in both arms", "an SD above zero"
    )


def positive(rows: Rows, *fields: str) -> None:
    """Refuse a value not above zero."""
    for field in fields:
        refuse(rows[field] <= 0, rows.labels, field, rows[field], "is not above zero", "a value above zero")


def interval(rows: Rows, *, log_scale: bool) -> None:
    """Refuse an interval unless it has a width, holds its estimate and is symmetric on the analysis scale.

    An interval taken as the estimate plus and minus a multiple of its standard error is symmetric on the
    scale of the analysis. Printed figures are rounded, so a gap between the estimate and the middle of the
    limits is accepted if rounding of the printed digits can explain it and it stays within a quarter of the
    half-width (own rule; beyond that the digits are too coarse to yield a standard error).

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
        positive(rows, "estimate", "ci_low")
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

    decimals = np.maximum(printed_decimals(low), printed_decimals(high))
    if (
        log_scale
    ):  # ratios below 10 are printed with a decimal at least; 2 (1 to 5) is no rounding to integers
        decimals = np.maximum(decimals, np.where(high < 10, 1, 0))
    half = _half_unit(decimals)
    half_estimate = _half_unit(np.maximum(decimals, printed_decimals(estimate)))
    middle_low = (scale(low - half) + scale(high - half)) / 2
    middle_high = (scale(low + half) + scale(high + half)) / 2
    explained = (scale(estimate - half_estimate) <= middle_high) & (
        scale(estimate + half_estimate) >= middle_low
    )
    gap = np.abs(scale(estimate) - (scale(low) + scale(high)) / 2)
    width = (scale(high) - scale(low)) / 2
    return (gap <= _FLOAT_NOISE * width) | (explained & (gap <= COARSEST * width))


def printed_decimals(values: FloatArray) -> IntArray:
    """Count the decimals a value was printed with, trailing zeros not counted (0.70 gives 1)."""
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


def present(values: FloatArray, labels: TextArray, field: str) -> None:
    """Refuse a missing entry of the field."""
    refuse(np.isnan(values), labels, field, values, "is missing", "a number")


def known_correction(correction: str) -> Correction:
    """Find the zero-cell correction of that name.

    Raises
    ------
    AnalysisError
        If there is none.
    """
    try:
        return Correction(correction)
    except ValueError:
        names = ", ".join(Correction)
        raise AnalysisError(
            "The zero-cell correction is unknown.", found=correction, expected=names
        ) from None


def known_amount(amount: float) -> float:
    """Return the size of a correction if it is above zero and finite."""
    if not (np.isfinite(amount) and amount > 0):
        raise AnalysisError("amount: is not above zero.", found=amount, expected="a number such as 0.5")
    return float(amount)
