"""Counts of two-arm trials, checked, for the models that work on counts."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.binomial import Arms
from treering.pooling.quadrature import Array

COUNT_COLUMNS = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")


def trial_names(table: pd.DataFrame) -> list[str]:
    """Names of the trials: column ``trial`` if the index is only a count, else the index.

    Parameters
    ----------
    table : DataFrame
        One row per trial.

    Returns
    -------
    list of str
    """
    counted = "trial" in table.columns and isinstance(table.index, pd.RangeIndex)
    return [str(name) for name in (table["trial"] if counted else table.index)]


def two_arm_counts(table: pd.DataFrame, *, whole: bool = True) -> Arms:
    """Read and check the counts of both arms.

    Parameters
    ----------
    table : DataFrame
        Columns ``intervention_events intervention_total comparator_events comparator_total``.
    whole : bool
        Whether fractions of people are refused (effective numbers of a cluster trial are fractions).

    Returns
    -------
    Arms
        Counts as floats, in row order.

    Raises
    ------
    AnalysisError
        Naming trial and field: missing column, missing or negative count, a fraction where
        whole numbers are asked, events above the total, total below 1; or an empty table.
    """
    missing = [name for name in COUNT_COLUMNS if name not in table.columns]
    if missing:
        raise AnalysisError("Columns of counts are missing.", found=missing, expected=list(COUNT_COLUMNS))
    if len(table) == 0:
        raise AnalysisError("There is no trial to pool.", expected="at least one trial")
    names = trial_names(table)
    columns = {name: _counts(table[name], name, names, whole) for name in COUNT_COLUMNS}
    for arm in ("intervention", "comparator"):
        events, total = columns[f"{arm}_events"], columns[f"{arm}_total"]
        _refuse(total <= 0, names, f"{arm}_total is not above zero.", total)
        _refuse(events > total, names, f"{arm}_events is above {arm}_total.", events)
    return Arms(*(columns[name] for name in COUNT_COLUMNS))


def _counts(column: pd.Series, name: str, names: list[str], whole: bool) -> Array:
    """Turn one column into counts, or say which trial's entry is none."""
    values = pd.to_numeric(column, errors="coerce").to_numpy(dtype=np.float64)
    expected = "a whole number of 0 or more" if whole else "a number of 0 or more"
    for trial, value, raw in zip(names, values, column, strict=True):
        if not np.isfinite(value) or value < 0 or (whole and value != np.floor(value)):
            raise AnalysisError(f"{name} is not a count.", trial=trial, found=raw, expected=expected)
    return values


def _refuse(bad: npt.NDArray[np.bool_], names: list[str], message: str, values: Array) -> None:
    """Raise for the first trial where ``bad`` holds."""
    for trial, wrong, value in zip(names, bad, values, strict=True):
        if wrong:
            raise AnalysisError(message, trial=trial, found=f"{value:g}")
