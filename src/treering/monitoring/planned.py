"""The planned test of one look: pooled estimate, its Z, its information.

The monitored Z is the signed normal quantile of the planned test's two-sided P value:
one scale for Wald and Knapp-Hartung tests, on which the boundaries are drawn.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtr, stdtrit

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.plan import MonitoringPlan
from treering.pooling import PooledEffect, pool
from treering.terms import IntervalMethod, PoolingModel


@dataclass(frozen=True, kw_only=True)
class PlannedTest:
    """The planned estimate with its test.

    Parameters
    ----------
    pooled : PooledEffect
        The planned pooled effect (a single trial is its own pooled effect).
    information : float
        1/variance of the common-effect estimate.
    df : int or None
        Degrees of freedom of the planned test; None for the normal distribution.
    z, p : float or None
        Signed normal quantile of the two-sided P value, and that P value; None when the planned test
        cannot be made with so few trials.
    """

    pooled: PooledEffect
    information: float
    df: int | None
    z: float | None
    p: float | None

    def limits_at(self, critical: float) -> tuple[float, float]:
        """Return the interval that excludes no effect exactly when |z| exceeds `critical`.

        Jennison and Turnbull 1989, J R Stat Soc B 51:305; for a Knapp-Hartung test the critical Z is
        first carried to the t distribution with the same tail.
        """
        factor = critical if self.df is None else _student_quantile(critical, self.df)
        reach = factor * self.pooled.standard_error
        return self.pooled.estimate - reach, self.pooled.estimate + reach


def _student_quantile(critical: float, df: int) -> float:
    """Return the t quantile with the same upper tail as the normal quantile `critical`."""
    return -float(stdtrit(df, ndtr(-critical)))


def check_trials(
    trials: Sequence[str], estimates: ArrayLike, variances: ArrayLike
) -> tuple[tuple[str, ...], FloatArray, FloatArray]:
    """Refuse trials that cannot be analysed and return them as a tuple and two arrays.

    Parameters
    ----------
    trials : sequence of str
        Trial identifiers.
    estimates, variances : array_like, shape (k,)
        Effects on the analysis scale with their variances.

    Returns
    -------
    tuple
        Identifiers, estimates, variances.

    Raises
    ------
    AnalysisError
        When lengths differ, an identifier comes twice, or a number is not usable.
    """
    names = tuple(str(trial) for trial in trials)
    y, v = np.asarray(estimates, dtype=float), np.asarray(variances, dtype=float)
    if not (y.shape == v.shape == (len(names),)):
        raise AnalysisError(
            "Trials, estimates and variances differ in number.",
            found=f"{len(names)} trials, {y.size} estimates, {v.size} variances",
            expected="one estimate and one variance for each trial",
        )
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise AnalysisError(
            "A trial enters the analysis twice.",
            trial=twice[0],
            next_step="Choose one result per trial by the protocol's rule.",
        )
    for name, estimate, variance in zip(names, y, v, strict=True):
        if not (np.isfinite(estimate) and np.isfinite(variance) and variance > 0.0):
            raise AnalysisError(
                "An estimate or its variance cannot be used.",
                trial=name,
                found=f"estimate {estimate}, variance {variance}",
                expected="a finite estimate and a finite variance above 0",
                next_step="Leave trials without a usable effect out of this analysis and list them.",
            )
    return names, y, v


def planned_test(plan: MonitoringPlan, estimates: FloatArray, variances: FloatArray) -> PlannedTest | None:
    """Make the planned test.

    With one trial a Knapp-Hartung test has no degrees of freedom, and between-trial variance cannot be
    seen. The Wald test would not fill the gap: it would treat tau2 as known to be zero exactly where
    nothing is known about it. Z is therefore None unless the plan's own test is the Wald test; waiting
    spends nothing, so no alpha is lost by it.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    estimates, variances : numpy.ndarray, shape (k,)
        Effects on the analysis scale with their variances.

    Returns
    -------
    PlannedTest or None
        None without any trial.
    """
    if len(estimates) == 0:
        return None
    return as_planned_test(plan, pool_as_planned(plan, estimates, variances), float(np.sum(1.0 / variances)))


def as_planned_test(
    plan: MonitoringPlan, pooled: PooledEffect, information: float | None = None
) -> PlannedTest:
    """Turn a pooled effect into the planned test.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    pooled : PooledEffect
        The planned pooled effect, for example one by Mantel and Haenszel.
    information : float, optional
        1/variance of the common-effect estimate; left out for a pooled effect that is itself a
        common-effect one, whose standard error tells it.

    Returns
    -------
    PlannedTest
    """
    wald = pooled.interval == IntervalMethod.WALD
    testable = not math.isnan(pooled.z) and (pooled.k > 1 or plan.interval == IntervalMethod.WALD)
    return PlannedTest(
        pooled=pooled,
        information=pooled.standard_error**-2 if information is None else information,
        df=None if wald else pooled.k - 1,
        z=pooled.z if testable else None,
        p=pooled.p if testable else None,
    )


def pool_as_planned(plan: MonitoringPlan, estimates: FloatArray, variances: FloatArray) -> PooledEffect:
    """Pool with the model, estimator and interval of the plan.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    estimates, variances : numpy.ndarray, shape (k,)
        Effects on the analysis scale with their variances.

    Returns
    -------
    PooledEffect
    """
    return pool(
        estimates,
        variances,
        model=PoolingModel(plan.model),
        tau2=plan.tau2,
        interval=plan.interval,
        level=plan.level,
        prediction_df=plan.prediction_df,
    )
