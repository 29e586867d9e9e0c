"""One place where arrays and options are checked before any pooling.

Every refusal names the trial and the field. A trial is named by its index label when a pandas object comes
in, otherwise by its place in the list, counted from 1.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from enum import StrEnum
from numbers import Real
from typing import Any, TypeVar

import numpy as np
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike, numbers, same_trials, trial_labels
from treering.pooling.result import FloatArray

Choice = TypeVar("Choice", bound=StrEnum)


def choose(kind: type[Choice], value: str, field: str) -> Choice:
    """Read an option written out in words.

    Raises
    ------
    AnalysisError
        The word is none of the known ones.
    """
    try:
        return kind(value)
    except ValueError:
        words = ", ".join(kind)
        raise AnalysisError(
            f"{field} is not a known word.", found=value, expected=f"one of {words}"
        ) from None


def check_level(level: float) -> float:
    """Confidence level strictly between 0 and 1, as a fraction.

    Raises
    ------
    AnalysisError
        The level is not between 0 and 1.
    """
    if isinstance(level, bool) or not isinstance(level, Real) or not 0.0 < level < 1.0:
        raise AnalysisError("level is a fraction between 0 and 1.", found=level, expected="for example 0.95")
    return float(level)


def refuse_first(bad: Any, values: FloatArray, labels: Sequence[object], message: str, expected: str) -> None:
    """Raise for the first trial that is marked bad, naming it; do nothing if none is."""
    if bad.any():
        at = int(np.argmax(bad))
        raise AnalysisError(message, trial=str(labels[at]), found=float(values[at]), expected=expected)


def check_effects(estimates: ArrayLike, variances: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Check estimates and variances of at least one trial.

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        Effects and their squared standard errors on the analysis scale.

    Returns
    -------
    tuple of ndarray
        Both as float arrays.

    Raises
    ------
    AnalysisError
        No trial, lengths differ, an estimate is not finite, a variance is not finite or not above zero; two
        pandas objects with the same labels in another order.
    """
    named = estimates if isinstance(estimates, pd.Series) else variances
    y, v = numbers(estimates, "estimates", named), numbers(variances, "variances", named)
    if y.size != v.size:
        raise AnalysisError(
            "estimates and variances differ in length.",
            found=f"{y.size} estimates and {v.size} variances",
            expected="one variance for each estimate",
        )
    if y.size == 0:
        raise AnalysisError("There is no trial to pool.", found=0, expected="at least one trial")
    same_trials(estimates, variances, "estimates and variances")
    # What is not a number is no smallest or largest one either, and compares as false.
    if not (-np.inf < y.min() and y.max() < np.inf and v.min() > 0.0 and v.max() < np.inf):
        _name_bad_trial(y, v, trial_labels(named, y.size))
    return y, v


def _name_bad_trial(y: FloatArray, v: FloatArray, labels: Sequence[object]) -> None:
    refuse_first(~np.isfinite(y), y, labels, "estimate is not a finite number.", "a finite number")
    refuse_first(~np.isfinite(v), v, labels, "variance is not a finite number.", "a finite number above zero")
    refuse_first(~(v > 0), v, labels, "variance is not above zero.", "a finite number above zero")


def check_finite_result(columns: Iterable[FloatArray], labels: Sequence[object]) -> None:
    """Refuse a result that overflowed: no silent NaN or infinity may leave this package.

    Raises
    ------
    AnalysisError
        An estimate or standard error is not finite.
    """
    for column in columns:
        bad = ~np.isfinite(column)
        if bad.any():
            at = int(np.argmax(bad))
            raise AnalysisError(
                "The numbers are too large or too small, or too far apart, to be pooled in double precision.",
                found=f"pooled value {column[at]} for {labels[at]}",
                next_step="Check the units of estimates and variances.",
            )
