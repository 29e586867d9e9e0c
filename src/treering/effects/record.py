"""The record that every conversion leaves: what was computed, from what, by which formula, from where."""

from __future__ import annotations

import math
from dataclasses import dataclass
from numbers import Real

from treering.errors import AnalysisError

NOT_STATED = "not stated"
# Beyond these sizes a square or a ratio of squares leaves the range of floating-point numbers.
_LARGEST, _SMALLEST = 1e75, 1e-75


@dataclass(frozen=True)
class Conversion:
    """One converted figure with its birth certificate.

    Parameters
    ----------
    formula : str
        Identifier of the formula, stable across versions.
    inputs : tuple of (str, float or str)
        Names and values that went in.
    result : tuple of (str, float)
        Names and values that came out.
    origin : str
        Where the inputs stand in the report, as the caller says.
    citation : str
        Source of the formula.
    remarks : tuple of str
        What a reader must know before relying on the result.
    """

    formula: str
    inputs: tuple[tuple[str, float | str], ...]
    result: tuple[tuple[str, float], ...]
    origin: str
    citation: str
    remarks: tuple[str, ...] = ()

    def __getitem__(self, name: str) -> float:
        """Return one result by name."""
        return dict(self.result)[name]

    def as_dict(self) -> dict[str, object]:
        """Return the record as plain values, for a store or a report."""
        return {
            "formula": self.formula,
            "inputs": dict(self.inputs),
            "result": dict(self.result),
            "origin": self.origin,
            "citation": self.citation,
            "remarks": list(self.remarks),
        }


def record(
    formula: str,
    citation: str,
    inputs: dict[str, float | str],
    result: dict[str, float],
    origin: str,
    remarks: tuple[str, ...] = (),
    *,
    trial: str | None = None,
) -> Conversion:
    """Make a record, refusing a result that is not finite.

    Parameters
    ----------
    formula, citation : str
        Identifier and source of the formula.
    inputs, result : dict
        Names and values that went in and came out.
    origin : str
        Where the inputs stand in the report.
    remarks : tuple of str
        What a reader must know.
    trial : str, optional
        Trial concerned, for messages.

    Returns
    -------
    Conversion
        The record.

    Raises
    ------
    AnalysisError
        If a result is infinite or NaN.
    """
    for name, value in result.items():
        need(math.isfinite(value), name, value, "the result is not finite", "inputs of ordinary size", trial)
    pairs = tuple((name, float(value)) for name, value in result.items())
    given = tuple((name, value if isinstance(value, str) else float(value)) for name, value in inputs.items())
    return Conversion(formula, given, pairs, origin, citation, remarks)


def need(
    holds: bool, field: str, found: object, problem: str, expected: str, trial: str | None = None
) -> None:
    """Raise unless a condition on one input holds.

    Parameters
    ----------
    holds : bool
        The condition.
    field : str
        Field at fault if it does not hold.
    found : object
        Value met.
    problem, expected : str
        What is wrong, and what would be right.
    trial : str, optional
        Trial concerned.

    Raises
    ------
    AnalysisError
        Naming the trial, if given, and the field.
    """
    if not holds:
        raise AnalysisError(f"{field}: {problem}.", trial=trial, found=found, expected=expected)


def need_positive(trial: str | None = None, **fields: float) -> None:
    """Refuse inputs that are not finite and above zero, or too small or large to compute with.

    Parameters
    ----------
    trial : str, optional
        Trial concerned.
    **fields : float
        Values by field.

    Raises
    ------
    AnalysisError
        Naming the trial, if given, and the field.
    """
    for field, value in fields.items():
        _need_number(field, value, trial)
        ok = math.isfinite(value) and value > 0
        need(ok, field, value, "is not finite and above zero", "a value above zero", trial)
        _need_ordinary(field, value, trial, smallest=_SMALLEST)


def need_finite(trial: str | None = None, **fields: float) -> None:
    """Refuse inputs that are not finite, or too large to compute with.

    Parameters
    ----------
    trial : str, optional
        Trial concerned.
    **fields : float
        Values by field.

    Raises
    ------
    AnalysisError
        Naming the trial, if given, and the field.
    """
    for field, value in fields.items():
        _need_number(field, value, trial)
        need(math.isfinite(value), field, value, "is not finite", "a finite number", trial)
        _need_ordinary(field, value, trial)


def need_people(trial: str | None = None, **fields: float) -> None:
    """Refuse totals that admit no SD.

    Parameters
    ----------
    trial : str, optional
        Trial concerned.
    **fields : float
        Values by field.

    Raises
    ------
    AnalysisError
        Naming the trial, if given, and the field.
    """
    for field, value in fields.items():
        _need_number(field, value, trial)
        ok = math.isfinite(value) and value > 1
        need(ok, field, value, "admits no SD", "two participants or more", trial)
        _need_ordinary(field, value, trial)


def need_probability(field: str, value: float, trial: str | None = None) -> None:
    """Refuse a level or P value outside the open interval from 0 to 1.

    Parameters
    ----------
    field : str
        Name of the field.
    value : float
        Its value.
    trial : str, optional
        Trial concerned.

    Raises
    ------
    AnalysisError
        Naming the trial, if given, and the field.
    """
    _need_number(field, value, trial)
    need(0 < value < 1, field, value, "is not between 0 and 1", "a value between 0 and 1", trial)


def _need_number(field: str, value: object, trial: str | None) -> None:
    real = isinstance(value, Real) and not isinstance(value, bool)
    need(real, field, repr(value), "is not a number", "a plain number", trial)


def _need_ordinary(field: str, value: float, trial: str | None, smallest: float = 0.0) -> None:
    ordinary = smallest <= abs(float(value)) <= _LARGEST
    need(ordinary, field, value, "is too small or large to compute with", "an ordinary size", trial)
