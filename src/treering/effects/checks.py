"""Checks of what a trial reports, before any formula sees it.

Every function takes rows and raises an ``AnalysisError`` that names the first faulty trial and the field.
"""

from __future__ import annotations

from numbers import Real

import numpy as np

from treering.effects.rows import FloatArray, Rows, TextArray, refuse
from treering.errors import AnalysisError
from treering.terms import Correction

ARMS = ("intervention", "comparator")


def counts(rows: Rows) -> None:
    """Refuse counts other than totals above zero, events from zero to the total, in both arms.

    Parameters
    ----------
    rows : Rows, k trials
        With events and total of both arms.

    Raises
    ------
    AnalysisError
        Naming the first faulty trial and the field.
    """
    for arm in ARMS:
        total, events = rows[f"{arm}_total"], rows[f"{arm}_events"]
        refuse(
            total <= 0, rows.labels, f"{arm}_total", total, "is not above zero", "at least one participant"
        )
        refuse(events < 0, rows.labels, f"{arm}_events", events, "is below zero", "0 or more")
        above = events > total
        refuse(above, rows.labels, f"{arm}_events", events, f"is above {arm}_total", "at most the total")


def person_time(rows: Rows) -> None:
    """Refuse rates other than events from zero and person-time above zero, in both arms.

    Parameters
    ----------
    rows : Rows, k trials
        With events and person-time of both arms.

    Raises
    ------
    AnalysisError
        Naming the first faulty trial and the field.
    """
    for arm in ARMS:
        events, time = rows[f"{arm}_events"], rows[f"{arm}_time"]
        refuse(events < 0, rows.labels, f"{arm}_events", events, "is below zero", "0 or more")
        refuse(time <= 0, rows.labels, f"{arm}_time", time, "is not above zero", "person-time above zero")


def means(rows: Rows) -> None:
    """Refuse arms other than totals that admit an SD, SDs from zero, and not both SDs zero.

    Parameters
    ----------
    rows : Rows, k trials
        With mean, SD and total of both arms.

    Raises
    ------
    AnalysisError
        Naming the first faulty trial and the field.
    """
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
    """Refuse a value not above zero.

    Parameters
    ----------
    rows : Rows
        With the fields.
    *fields : str
        Fields to check.

    Raises
    ------
    AnalysisError
        Naming the first faulty trial and the field.
    """
    for field in fields:
        refuse(rows[field] <= 0, rows.labels, field, rows[field], "is not above zero", "a value above zero")


def present(values: FloatArray, labels: TextArray, field: str) -> None:
    """Refuse a missing entry of the field.

    Parameters
    ----------
    values : ndarray, shape (k,)
        The field's values.
    labels : ndarray of object, shape (k,)
        Trial labels.
    field : str
        Name of the field.

    Raises
    ------
    AnalysisError
        Naming the first trial without the field.
    """
    refuse(np.isnan(values), labels, field, values, "is missing", "a number")


def known_correction(correction: str) -> Correction:
    """Find the zero-cell correction of that name.

    Parameters
    ----------
    correction : str
        "none", "constant" or "treatment-arm".

    Returns
    -------
    Correction
        The term.

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
    """Return the size of a correction if it is above zero and finite.

    Parameters
    ----------
    amount : float
        Events.

    Returns
    -------
    float
        The amount.

    Raises
    ------
    AnalysisError
        If it is not above zero and finite.
    """
    real = isinstance(amount, Real) and not isinstance(amount, bool)
    if not (real and np.isfinite(amount) and amount > 0):
        raise AnalysisError("amount: is no number above zero.", found=amount, expected="a number such as 0.5")
    return float(amount)
