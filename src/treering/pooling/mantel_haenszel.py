"""Mantel-Haenszel pooling of risk ratio, odds ratio and risk difference, and its chi-square test.

Works on sparse tables without any correction; a trial in which a relative measure has nothing to compare
stays listed with weight zero.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy import special

from treering.effects.binary import log_odds_ratio, log_risk_ratio, risk_difference
from treering.errors import AnalysisError
from treering.pooling.checks import choose
from treering.pooling.counts import Counts, common_effect, deviations, read_counts, silent_trials
from treering.pooling.result import FloatArray, PooledEffect
from treering.terms import Measure

MEASURES = (Measure.RISK_RATIO, Measure.ODDS_RATIO, Measure.RISK_DIFFERENCE)


_OWN_EFFECTS = {
    Measure.RISK_RATIO: log_risk_ratio,
    Measure.ODDS_RATIO: log_odds_ratio,
    Measure.RISK_DIFFERENCE: risk_difference,
}


def pool_mantel_haenszel(
    table: pd.DataFrame, measure: str, *, correction: str = "none", amount: float = 0.5
) -> PooledEffect:
    """Pool two-by-two tables by Mantel and Haenszel.

    Parameters
    ----------
    table : DataFrame, k rows
        ``intervention_events intervention_total comparator_events comparator_total``.
    measure : {"risk-ratio", "odds-ratio", "risk-difference"}
        Ratios are pooled and returned on the log scale.
    correction : {"none", "constant", "treatment-arm"}
        What is done with trials that have a zero cell.
    amount : float
        Events added to each cell ("constant"), or half the sum of both arms' corrections.

    Returns
    -------
    PooledEffect
        Common effect with its Wald interval. Q is Cochran's, the inverse-variance squares around this
        estimate over the trials whose own effect has a variance.

    Raises
    ------
    AnalysisError
        A count that cannot be right; an arm without any event in all trials (no ratio); another measure.

    References
    ----------
    Mantel N, Haenszel W (1959), J Natl Cancer Inst 22:719. Variances: odds ratio Robins, Breslow, Greenland
    (1986), Biometrics 42:311; risk ratio and risk difference Greenland, Robins (1985), Biometrics 41:55.
    Cited from memory.
    """
    kind = choose(Measure, measure, "measure")
    if kind not in MEASURES:
        raise AnalysisError(
            "Mantel-Haenszel is for two-by-two tables.", found=measure, expected=", ".join(MEASURES)
        )
    cells = read_counts(table, correction, amount)
    estimators = {
        Measure.RISK_RATIO: _risk_ratio,
        Measure.ODDS_RATIO: _odds_ratio,
        Measure.RISK_DIFFERENCE: _risk_difference,
    }
    estimate, variance, weights, informative = estimators[kind](cells)
    q, q_df, without = _cochran_q(cells, kind, estimate)
    return common_effect(
        estimate=estimate,
        variance=variance,
        q=q,
        q_df=q_df,
        weights=weights,
        method="mantel-haenszel",
        remarks=silent_trials(informative, "no event, or nothing but events, to compare") + without,
    )


def _risk_ratio(x: Counts) -> tuple[float, float, FloatArray, np.ndarray]:
    r, s = x.a * x.n2 / x.n, x.c * x.n1 / x.n
    _refuse_empty(r, s, "risk ratio")
    spread = (x.n1 * x.n2 * x.events - x.a * x.c * x.n) / (x.n * x.n)
    variance = spread.sum() / (r.sum() * s.sum())
    informative = x.events > 0.0
    weights = np.where(informative, s + r * (s.sum() / r.sum()), 0.0)
    return float(np.log(r.sum() / s.sum())), float(variance), weights, informative


def _odds_ratio(x: Counts) -> tuple[float, float, FloatArray, np.ndarray]:
    r, s = x.a * x.d / x.n, x.b * x.c / x.n
    _refuse_empty(r, s, "odds ratio")
    p, q = (x.a + x.d) / x.n, (x.b + x.c) / x.n
    total_r, total_s = r.sum(), s.sum()
    variance = (
        (p * r).sum() / total_r**2 + (p * s + q * r).sum() / (total_r * total_s) + (q * s).sum() / total_s**2
    ) / 2.0
    informative = (x.events > 0.0) & (x.b + x.d > 0.0)
    return float(np.log(total_r / total_s)), float(variance), s + r * (total_s / total_r), informative


def _risk_difference(x: Counts) -> tuple[float, float, FloatArray, np.ndarray]:
    weights = x.n1 * x.n2 / x.n
    difference = ((x.a * x.n2 - x.c * x.n1) / x.n).sum() / weights.sum()
    spread = (x.a * x.b * x.n2**3 + x.c * x.d * x.n1**3) / (x.n1 * x.n2 * x.n**2)
    variance = spread.sum() / weights.sum() ** 2
    if not variance > 0.0:
        raise AnalysisError(
            "The variance of the risk difference is zero: every arm has no event or nothing but events."
        )
    return float(difference), float(variance), weights, np.ones(x.n.size, dtype=bool)


def _refuse_empty(r: FloatArray, s: FloatArray, name: str) -> None:
    if not (r.sum() > 0.0 and s.sum() > 0.0):
        raise AnalysisError(
            f"The {name} cannot be computed: one side of the comparison is empty in all trials together.",
            found=f"sums {r.sum():g} and {s.sum():g}",
            expected="both above zero",
            next_step="Pool the risk difference, or choose a correction in the protocol.",
        )


def _cochran_q(x: Counts, measure: Measure, estimate: float) -> tuple[float, float, tuple[str, ...]]:
    own = _OWN_EFFECTS[measure](x.rows())
    y, v = own.estimate, own.variance
    usable = np.isfinite(y) & np.isfinite(v) & (v > 0.0)  # an effect without variance has no weight
    count = int(usable.sum())
    q = float(((y[usable] - estimate) ** 2 / v[usable]).sum())
    remark = f"Q and what follows from it rest on the {count} of {y.size} trials without a zero cell."
    return (q if count > 1 else 0.0), float(max(count - 1, 0)), ((remark,) if count < y.size else ())


@dataclass(frozen=True)
class ChiSquare:
    """A chi-square statistic on one degree of freedom and its P value."""

    statistic: float
    p: float


def cochran_mantel_haenszel(table: pd.DataFrame, *, continuity: bool = False) -> ChiSquare:
    """Test of no association over all tables (Mantel and Haenszel 1959).

    Parameters
    ----------
    table : DataFrame, k rows
        The four columns of counts.
    continuity : bool
        Whether half a unit is taken off the absolute deviation.

    Returns
    -------
    ChiSquare
        Statistic on one degree of freedom and its P value.

    Raises
    ------
    AnalysisError
        A count that cannot be right, or no trial that compares anything.
    """
    deviation, variance = deviations(table)
    if not variance.sum() > 0.0:
        raise AnalysisError("No trial has both events and non-events: there is nothing to test.")
    gap = max(abs(deviation.sum()) - (0.5 if continuity else 0.0), 0.0)
    statistic = float(gap**2 / variance.sum())
    return ChiSquare(statistic, float(special.chdtrc(1.0, statistic)))
