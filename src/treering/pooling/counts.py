"""Two-by-two counts as arrays, and the shell that all count-based pooled effects share."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd

from treering.effects.binary import observed_minus_expected
from treering.effects.checks import known_amount, known_correction
from treering.effects.rows import Rows, refuse
from treering.effects.zero_cells import COUNTS, corrected_rows, count_rows
from treering.errors import AnalysisError
from treering.pooling.inference import heterogeneity_p, i2_interval, normal_test
from treering.pooling.result import FloatArray, PooledEffect

TAU2_NOT_PART = (
    "This method assumes one common effect: tau2 is zero by assumption; its interval and a prediction "
    "interval are not part of the method."
)


class Counts(NamedTuple):
    """Cells of the 2 by 2 tables, shape (k,) each: with and without event, intervention then comparator."""

    a: FloatArray
    b: FloatArray
    c: FloatArray
    d: FloatArray

    @property
    def n1(self) -> FloatArray:
        """Size of the intervention arm."""
        return self.a + self.b

    @property
    def n2(self) -> FloatArray:
        """Size of the comparator arm."""
        return self.c + self.d

    @property
    def n(self) -> FloatArray:
        """Size of the trial."""
        return self.n1 + self.n2

    @property
    def events(self) -> FloatArray:
        """Events in both arms."""
        return self.a + self.c

    def rows(self) -> Rows:
        """Return the tables as rows for the functions of one trial's effect; labels are row numbers."""
        values = dict(zip(COUNTS, (self.a, self.n1, self.c, self.n2), strict=True))
        return Rows(values, np.arange(1, self.n.size + 1).astype(object))


def read_counts(
    table: pd.DataFrame, correction: str = "none", amount: float = 0.5, *, whole: bool = False
) -> Counts:
    """Read, check and if asked correct the counts of a table.

    Parameters
    ----------
    table : DataFrame, k rows
        ``intervention_events intervention_total comparator_events comparator_total``.
    correction : str
        "none", "constant" or "treatment-arm"; only trials with a zero cell change.
    amount : float
        Size of the correction, in events; see `treering.effects.corrected_counts`.
    whole : bool
        Whether fractions of people are refused (effective numbers of a cluster trial are fractions).

    Returns
    -------
    Counts
        Cells of every trial.

    Raises
    ------
    AnalysisError
        No trial, or a count that cannot be right, naming trial and field.
    """
    rows = _rows(table, correction, amount)
    if whole:
        for field in COUNTS:
            part = rows[field] != np.floor(rows[field])
            refuse(part, rows.labels, field, rows[field], "is not a whole number", "a count of people")
    fixed, _ = corrected_rows(rows)
    a, n1, c, n2 = (fixed[field] for field in COUNTS)
    return Counts(a, n1 - a, c, n2 - c)


def _rows(table: pd.DataFrame, correction: str = "none", amount: float = 0.5) -> Rows:
    if not isinstance(table, pd.DataFrame):
        raise AnalysisError(
            "The table of counts must be a DataFrame.",
            found=type(table).__name__,
            expected="a DataFrame with the columns " + ", ".join(COUNTS),
        )
    if len(table) == 0:
        raise AnalysisError("There is no trial to pool.", found=0, expected="at least one trial")
    return count_rows(table, known_correction(correction), known_amount(amount))


def deviations(table: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
    """Observed minus expected intervention events, and their variance with all margins fixed.

    Parameters
    ----------
    table : DataFrame, k rows
        The four columns of counts.

    Returns
    -------
    tuple of ndarray, shape (k,)
        O - E and V; see `treering.effects.binary.observed_minus_expected`.

    Raises
    ------
    AnalysisError
        No trial, or a count that cannot be right.
    """
    return observed_minus_expected(_rows(table))


def common_effect(
    *,
    estimate: float,
    variance: float,
    q: float,
    q_df: float,
    weights: FloatArray,
    method: str,
    remarks: tuple[str, ...],
    level: float = 0.95,
) -> PooledEffect:
    """Dress a common-effect estimate from counts as a `PooledEffect` with its Wald interval.

    Parameters
    ----------
    estimate, variance : float
        On the analysis scale.
    q, q_df : float
        Heterogeneity statistic and its degrees of freedom (zero if it has none).
    weights : ndarray, shape (k,)
        Unscaled weights, zero for trials that say nothing.
    method : str
        Name that stands in `tau2_method`.
    remarks : tuple of str
        Remarks of the method.
    level : float
        Confidence level.

    Returns
    -------
    PooledEffect
        With tau2 zero by assumption and d2 zero accordingly.
    """
    error = float(np.sqrt(variance))
    test = normal_test(np.array([estimate]), np.array([error]), level)
    known = q_df >= 1.0
    low, high = (float(x[0]) for x in i2_interval(np.array([q]), np.array([q_df]), level))
    return PooledEffect(
        estimate=estimate,
        standard_error=error,
        ci_low=float(test.low[0]),
        ci_high=float(test.high[0]),
        z=float(test.z[0]),
        p=float(test.p[0]),
        tau2=0.0,
        tau2_low=np.nan,
        tau2_high=np.nan,
        q=q,
        q_df=q_df,
        q_p=float(heterogeneity_p(q, q_df)),
        i2=max(0.0, (q - q_df) / q) if known and q > 0.0 else (0.0 if known else np.nan),
        i2_low=low,
        i2_high=high,
        h2=q / q_df if known else np.nan,
        d2=0.0,
        prediction_low=np.nan,
        prediction_high=np.nan,
        weights=weights / weights.sum(),
        k=int((weights > 0.0).sum()),
        model="common",
        interval="wald",
        tau2_method=method,
        level=level,
        remarks=(TAU2_NOT_PART, *remarks),
    )


def silent_trials(informative: np.ndarray, reason: str) -> tuple[str, ...]:
    """Remark on trials that stay listed with weight zero; empty if there are none."""
    silent = int((~informative).sum())
    return (f"{silent} of {informative.size} trials carry no weight: {reason}.",) if silent else ()
