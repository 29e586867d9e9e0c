"""What passes between the table reader and the formulas: rows of numbers with their trial labels.

Also the one way in which a fault in these numbers is reported: the first faulty trial, its field, what
was found and what would have been right.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from treering.errors import AnalysisError
from treering.terms import Correction

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int_]
BoolArray = npt.NDArray[np.bool_]
TextArray = npt.NDArray[np.object_]


@dataclass(frozen=True)
class Rows:
    """Complete rows of one table, as arrays of shape (k,).

    Parameters
    ----------
    values : mapping of str to ndarray
        Columns by name.
    labels : ndarray of object, shape (k,)
        Trial labels, only for messages.
    correction : Correction
        What is done with a zero cell.
    amount : float
        Size of the correction (events).
    """

    values: Mapping[str, FloatArray]
    labels: TextArray
    correction: Correction = Correction.NONE
    amount: float = 0.5

    def __getitem__(self, field: str) -> FloatArray:
        """Return one column."""
        return self.values[field]


@dataclass(frozen=True)
class Effects:
    """Estimates and variances on the analysis scale, shape (k,).

    Parameters
    ----------
    estimate, variance : ndarray
        NaN only where ``reason`` says why.
    reason : ndarray of object
        Why a trial is left out; "" if it is in.
    corrected : ndarray of bool
        Which trials had a zero-cell correction.
    """

    estimate: FloatArray
    variance: FloatArray
    reason: TextArray
    corrected: BoolArray

    @classmethod
    def plain(cls, estimate: FloatArray, variance: FloatArray) -> Effects:
        """Effects of which none is left out or corrected."""
        shape = estimate.shape
        return cls(estimate, variance, np.full(shape, "", dtype=object), np.zeros(shape, dtype=bool))


@dataclass(frozen=True)
class LeftOut:
    """A trial that stays listed but gives no usable effect on this measure.

    Parameters
    ----------
    trial : hashable
        Its label.
    reason : str
        Why it is left out, in words for the report.
    """

    trial: Hashable
    reason: str


def refuse(
    bad: BoolArray,
    labels: TextArray,
    field: str,
    found: FloatArray | TextArray | Callable[[int], object],
    problem: str,
    expected: str,
) -> None:
    """Raise for the first faulty trial, if there is one.

    Parameters
    ----------
    bad : ndarray of bool, shape (k,)
        Where the fault is.
    labels : ndarray of object, shape (k,)
        Trial labels.
    field : str
        Name of the field at fault.
    found : ndarray, shape (k,), or callable
        The values met, or a function from a position to the value met there.
    problem, expected : str
        What is wrong, and what would be right.

    Raises
    ------
    AnalysisError
        Naming the trial and the field.
    """
    if not bad.any():
        return
    at = int(np.argmax(bad))
    raise AnalysisError(
        f"{field}: {problem}.",
        trial=str(labels[at]),
        found=found(at) if callable(found) else found[at],
        expected=expected,
        next_step="Correct the field in the extraction; nothing was computed.",
    )
