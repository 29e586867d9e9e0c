"""What comes in as lists or pandas objects, as plain arrays of numbers, or one clear refusal."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt
import pandas as pd

from treering.effects.columns import read_number
from treering.errors import AnalysisError
from treering.pooling.result import FloatArray

ArrayLike = npt.ArrayLike | pd.Series


def trial_labels(values: object, count: int) -> Sequence[object]:
    """Labels of the trials: the pandas index, or 1, 2, ... for plain lists."""
    if isinstance(values, (pd.Series, pd.DataFrame)):
        return list(values.index)
    return range(1, count + 1)


def numbers(values: ArrayLike, field: str, labels: object = None) -> FloatArray:
    """Values as a one-dimensional float array.

    Parameters
    ----------
    values : array_like
        Numbers; None and missing values of pandas become NaN.
    field : str
        Name for the error.
    labels : object, optional
        The pandas object whose index names the trials, if it is not `values`.

    Returns
    -------
    ndarray
        The numbers.

    Raises
    ------
    AnalysisError
        The values are not numbers or not one-dimensional, or some are masked.
    """
    try:
        array = np.asarray(values)
    except (TypeError, ValueError) as error:
        raise AnalysisError(f"{field} must be one list of numbers.", found=str(error)) from error
    if array.ndim != 1:
        found = type(values).__name__ if array.ndim == 0 else f"{array.ndim} dimensions"
        raise AnalysisError(f"{field} must be one list of numbers.", found=found)
    if array.dtype.kind in "Mm":
        raise AnalysisError(
            f"{field} must be numbers.", found=str(array.dtype), expected="numbers, not dates"
        )
    if array.dtype.kind in "fiu" and not isinstance(values, np.ma.MaskedArray):
        return np.asarray(array, dtype=np.float64)
    cells = np.ma.filled(values.astype(object), None) if isinstance(values, np.ma.MaskedArray) else array
    named = trial_labels(values if isinstance(values, pd.Series) else labels, array.size)
    return np.array(
        [_number(cell, field, label) for cell, label in zip(cells.tolist(), named, strict=True)],
        dtype=np.float64,
    )


def _number(cell: object, field: str, label: object) -> float:
    """Read one entry of a list that numpy does not take for plain numbers."""
    number = read_number(cell)
    missing = cell is None or cell is pd.NA or (isinstance(cell, float) and np.isnan(cell))
    beyond = np.isinf(number) and not isinstance(cell, float)
    if missing or not (np.isnan(number) or beyond):
        return number
    raise AnalysisError(
        f"{field} must be numbers.",
        trial=str(label),
        found=str(cell)[:60],
        expected="a number of ordinary size",
    )


def same_trials(one: object, other: object, fields: str) -> None:
    """Refuse two pandas objects that list the same trials in another order.

    They are read by position; with other labels altogether nothing can be told and nothing is refused.

    Parameters
    ----------
    one, other : object
        What came in.
    fields : str
        Both names, for the error.

    Raises
    ------
    AnalysisError
        Same labels, other order.
    """
    kinds = (pd.Series, pd.DataFrame)
    if not (isinstance(one, kinds) and isinstance(other, kinds)) or one.index.equals(other.index):
        return
    if len(one.index) == len(other.index) and one.index.is_unique and one.index.isin(other.index).all():
        at = int(np.argmax(one.index.to_numpy() != other.index.to_numpy()))
        raise AnalysisError(
            f"{fields} list the trials in another order.",
            trial=str(one.index[at]),
            found=other.index[at],
            expected="the same order of labels in both",
            next_step="Take both from one table, or sort them alike.",
        )
