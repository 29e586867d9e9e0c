"""What a table says, read as labels and numbers: nothing but plain finite numbers passes as a number.

Every function raises an ``AnalysisError`` that names the field and, if there is one, the first faulty trial.
"""

from __future__ import annotations

from decimal import Decimal
from numbers import Real

import numpy as np
import pandas as pd

from treering.effects.rows import FloatArray, TextArray, refuse
from treering.errors import AnalysisError


def as_table(table: object) -> pd.DataFrame:
    """Take what came as a table, if pandas can.

    Parameters
    ----------
    table : object
        A DataFrame, or what makes one, such as a mapping of columns or a list of rows.

    Returns
    -------
    DataFrame
        The table.

    Raises
    ------
    AnalysisError
        If no table can be made of it.
    """
    try:
        found: pd.DataFrame = pd.DataFrame(table)  # type: ignore[call-overload]  # whatever came is tried
    except (ValueError, TypeError):
        kind = type(table).__name__
        raise AnalysisError("The input is no table.", found=kind, expected="a row for each trial") from None
    return found


def trial_labels(table: pd.DataFrame) -> TextArray:
    """Labels for messages: the column ``trial`` if the index holds only numbers, else the index.

    Parameters
    ----------
    table : DataFrame, k rows
        Trials.

    Returns
    -------
    ndarray of object, shape (k,)
        One label a row.
    """
    places = np.asarray(table.index.to_numpy(dtype=object))
    if "trial" not in table.columns or not pd.api.types.is_integer_dtype(table.index.dtype):
        return places
    names = column(table, "trial")
    return np.asarray(np.where(names.isna(), places, names.to_numpy(dtype=object)))


def column(table: pd.DataFrame, field: str) -> pd.Series:
    """Take one column, refusing a name that stands twice.

    Parameters
    ----------
    table : DataFrame, k rows
        Trials.
    field : str
        Column to take.

    Returns
    -------
    Series
        The column as it stands.

    Raises
    ------
    AnalysisError
        If the column stands twice in the table.
    """
    found = table[field]
    if isinstance(found, pd.DataFrame):
        raise AnalysisError(f"{field}: the column stands more than once in the table.")
    return found


def read_numbers(table: pd.DataFrame, field: str, labels: TextArray) -> FloatArray:
    """Read one column as floats; a missing entry becomes NaN.

    Parameters
    ----------
    table : DataFrame, k rows
        Trials.
    field : str
        Column to read.
    labels : ndarray of object, shape (k,)
        Trial labels, for messages.

    Returns
    -------
    ndarray, shape (k,)
        Numbers, NaN where nothing is reported.

    Raises
    ------
    AnalysisError
        If the column stands twice in the table, or an entry is not a finite number.
    """
    cells = column(table, field)
    raw = cells.to_numpy(dtype=object)
    numbers = (
        _floats(cells) if _is_plain(cells) else np.array([read_number(cell) for cell in raw], dtype=float)
    )
    missing = np.asarray(cells.isna().to_numpy(), dtype=bool)
    refuse(np.isnan(numbers) & ~missing, labels, field, raw, "is not a number", "a plain number")
    refuse(np.isinf(numbers), labels, field, raw, "is not finite", "a finite number")
    return numbers


def read_counts(table: pd.DataFrame, field: str, labels: TextArray) -> FloatArray:
    """Read one column of counts or person-time as floats from zero; a missing entry becomes NaN.

    Parameters
    ----------
    table : DataFrame, k rows
        Trials.
    field : str
        Column to read.
    labels : ndarray of object, shape (k,)
        Trial labels, for messages.

    Returns
    -------
    ndarray, shape (k,)
        Counts, NaN where nothing is reported.

    Raises
    ------
    AnalysisError
        If the column stands twice in the table, or an entry is not a finite number from zero.
    """
    numbers = read_numbers(table, field, labels)
    refuse(numbers < 0, labels, field, numbers, "is below zero", "0 or more")
    return numbers


def figures(field: str, values: FloatArray | float, *, above: float = 0.0) -> FloatArray:
    """Read numbers that all must be finite and above a bound.

    Parameters
    ----------
    field : str
        Name of the figures.
    values : array_like
        Numbers.
    above : float
        The bound.

    Returns
    -------
    ndarray
        The numbers as floats.

    Raises
    ------
    AnalysisError
        Naming the field, if one is no number, not finite or not above the bound.
    """
    wanted = f"finite and above {above:g}"
    try:
        found = np.asarray(values, dtype=float)
    except (TypeError, ValueError):
        raise AnalysisError(f"{field}: is not a number.", found=repr(values), expected=wanted) from None
    bad = ~(np.isfinite(found) & (found > above))
    if bad.any():
        raise AnalysisError(f"{field}: is not {wanted}.", found=float(found[bad][0]), expected=wanted)
    return found


def _is_plain(cells: pd.Series) -> bool:
    """Whether the column's type holds nothing but real numbers: dates and truth values are none."""
    kind = cells.dtype
    other = pd.api.types.is_bool_dtype(kind) or pd.api.types.is_complex_dtype(kind)
    return pd.api.types.is_numeric_dtype(kind) and not other


def _floats(cells: pd.Series) -> FloatArray:
    numbers = cells.to_numpy(dtype=float, na_value=np.nan)
    if cells.dtype in (np.float16, np.float32):  # the digits that were printed, not those of the wider type
        numbers = cells.to_numpy().astype(str).astype(float)
    return np.asarray(numbers)


def read_number(cell: object) -> float:
    """Read one entry of unknown type: the one rule of what counts as a number.

    Parameters
    ----------
    cell : object
        A number, or a text that is one; truth values, dates and complex numbers are none.

    Returns
    -------
    float
        NaN where it holds no number, infinity where the number is beyond floating point.
    """
    if isinstance(cell, bool | np.bool_) or not isinstance(cell, str | Real | Decimal):
        return np.nan
    if isinstance(cell, str) and "_" in cell:
        return np.nan
    try:
        return float(cell)
    except ValueError:
        return np.nan
    except OverflowError:
        return np.inf
