"""Two-by-two counts as arrays, and the shell that all count-based pooled effects share."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd

from treering.effects.zero_cells import corrected_counts
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


def read_counts(table: pd.DataFrame, correction: str = "none") -> Counts:
    """Read, check and if asked correct the counts of a table.

    Parameters
    ----------
    table : DataFrame, k rows
        ``intervention_events intervention_total comparator_events comparator_total``.
    correction : str
        "none", "constant" (0.5) or "treatment-arm"; only trials with a zero cell change.

    Returns
    -------
    Counts
        Cells of every trial.

    Raises
    ------
    AnalysisError
        No trial, or a count that cannot be right, naming trial and field.
    """
    if len(table) == 0:
        raise AnalysisError("There is no trial to pool.", found=0, expected="at least one trial")
    fixed = corrected_counts(table, correction)
    arms = [
        (fixed[f"{arm}_events"].to_numpy(np.float64), fixed[f"{arm}_total"].to_numpy(np.float64))
        for arm in ("intervention", "comparator")
    ]
    (a, n1), (c, n2) = arms
    return Counts(a, n1 - a, c, n2 - c)


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
