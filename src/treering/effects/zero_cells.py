"""Trials with no events, or with nothing but events, in one arm or in both.

On relative measures a zero cell leaves the ratio or its variance undefined. Nothing is added unless the
protocol asks for it: a fixed half event biases ratios when arms differ in size (Sweeting, Sutton and
Lambert 2004, Stat Med 23:1351).

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from treering.effects import checks, columns
from treering.effects.rows import BoolArray, FloatArray, Rows
from treering.errors import AnalysisError
from treering.terms import Correction

COUNTS = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")


def has_zero_cell(rows: Rows) -> BoolArray:
    """Tell which 2 by 2 tables have an empty cell, shape (k,).

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    ndarray of bool, shape (k,)
        True where any of the four cells is empty.
    """
    zero = np.zeros(len(rows.labels), dtype=bool)
    for arm in checks.ARMS:
        events, total = rows[f"{arm}_events"], rows[f"{arm}_total"]
        zero |= (events == 0) | (events == total)
    return zero


def correction_amounts(
    correction: Correction, amount: float, intervention_size: FloatArray, comparator_size: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Events added in each arm of a trial with a zero cell.

    Parameters
    ----------
    correction : Correction
        ``constant`` adds ``amount`` in both arms. ``treatment-arm`` divides ``2 * amount`` in proportion to
        the size of the arms, so that a double-zero trial shows no effect: with R the ratio of comparator to
        intervention size, 1/(R + 1) and R/(R + 1) for amount 0.5 (Sweeting, Sutton and Lambert 2004).
    amount : float
        Half the sum of both corrections (events).
    intervention_size, comparator_size : ndarray, shape (k,)
        Participants or person-time.

    Returns
    -------
    tuple of ndarray
        Corrections of the intervention and the comparator arm, shape (k,).
    """
    if correction is Correction.NONE:
        return np.zeros(intervention_size.shape), np.zeros(comparator_size.shape)
    if correction is Correction.CONSTANT:
        return np.full(intervention_size.shape, amount), np.full(comparator_size.shape, amount)
    share = intervention_size / (intervention_size + comparator_size)
    return 2 * amount * share, 2 * amount * (1 - share)


def corrected_rows(rows: Rows) -> tuple[Rows, BoolArray]:
    """Give the counts with the correction added in trials with a zero cell, and which trials these are.

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total`` and the correction.

    Returns
    -------
    tuple of Rows and ndarray of bool
        Counts after correction, and which trials changed, shape (k,).
    """
    zero = has_zero_cell(rows)
    if rows.correction is Correction.NONE:
        return rows, np.zeros(zero.shape, dtype=bool)
    totals = (rows["intervention_total"], rows["comparator_total"])
    added = correction_amounts(rows.correction, rows.amount, *totals)
    values = dict(rows.values)
    for arm, extra in zip(checks.ARMS, added, strict=True):
        values[f"{arm}_events"] = rows[f"{arm}_events"] + np.where(zero, extra, 0.0)
        values[f"{arm}_total"] = rows[f"{arm}_total"] + np.where(zero, 2 * extra, 0.0)
    return Rows(values, rows.labels, rows.correction, rows.amount), zero


def count_rows(table: pd.DataFrame, correction: Correction = Correction.NONE, amount: float = 0.5) -> Rows:
    """Read and check the four count columns of a table.

    Parameters
    ----------
    table : DataFrame, k rows
        With the four count columns.
    correction : Correction
        Correction that the rows carry along.
    amount : float
        Its size, in events.

    Returns
    -------
    Rows
        Checked counts.

    Raises
    ------
    AnalysisError
        If a column or an entry is missing, or a count cannot be right.
    """
    table = columns.as_table(table)
    labels = columns.trial_labels(table)
    absent = [field for field in COUNTS if field not in table.columns]
    if absent:
        raise AnalysisError(f"{absent[0]}: the column is missing.", expected=", ".join(COUNTS))
    values = {field: columns.read_numbers(table, field, labels) for field in COUNTS}
    for field in COUNTS:
        checks.present(values[field], labels, field)
    rows = Rows(values, labels, correction, amount)
    checks.counts(rows)
    return rows


def corrected_counts(table: pd.DataFrame, correction: str = "none", amount: float = 0.5) -> pd.DataFrame:
    """Give the four counts with the zero-cell correction of the protocol.

    Parameters
    ----------
    table : DataFrame, k rows
        With ``intervention_events intervention_total comparator_events comparator_total``.
    correction : str
        "none", "constant" or "treatment-arm"; only trials with a zero cell change.
    amount : float
        Events added to each cell ("constant"), or half the sum of both arms' corrections.

    Returns
    -------
    DataFrame, k rows
        The four columns and ``zero_cell`` and ``double_zero`` (bool), with the index of ``table``.

    Raises
    ------
    AnalysisError
        If a count cannot be right, or the correction is unknown.
    """
    table = columns.as_table(table)
    rows = count_rows(table, checks.known_correction(correction), checks.known_amount(amount))
    corrected, _ = corrected_rows(rows)
    frame = pd.DataFrame({field: corrected[field] for field in COUNTS}, index=table.index)
    frame["zero_cell"] = has_zero_cell(rows)
    frame["double_zero"] = (rows["intervention_events"] == 0) & (rows["comparator_events"] == 0)
    return frame
