"""Which measure a table is most likely meant for, when nobody says."""

from __future__ import annotations

from collections.abc import Iterable

from treering.terms import Measure

_OF_BOTH_ARMS = {
    ("events", "total"): Measure.RISK_RATIO,
    ("events", "time"): Measure.RATE_RATIO,
    ("mean", "sd", "total"): Measure.MEAN_DIFFERENCE,
}


def usual_measure(columns: Iterable[str]) -> Measure | None:
    """Tell the measure that is usually taken for such columns (common practice, no source).

    Parameters
    ----------
    columns : iterable of str
        Columns of the table.

    Returns
    -------
    Measure or None
        None where the columns fit no measure, or more than one kind of measure.
    """
    there = set(columns)
    fitting = [
        measure
        for fields, measure in _OF_BOTH_ARMS.items()
        if all(f"{arm}_{field}" in there for arm in ("intervention", "comparator") for field in fields)
    ]
    if {"estimate", "standard_error"} <= there:
        fitting.append(Measure.GENERIC)
    return fitting[0] if len(fitting) == 1 else None
