"""Meta-regression: how trial effects move with covariates of the trials.

Tests and intervals by Knapp and Hartung 2003 (Stat Med 22:2693): the covariance is multiplied by
s2 = Q(tau2) / (k - p) and Student's t with k - p degrees of freedom is used. "modified" keeps s2 from
falling below 1, so that the interval is never narrower than the ordinary one by chance.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy import stats

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike, same_trials, trial_labels
from treering.pooling.checks import check_effects, check_level, choose
from treering.pooling.moderated import Design, WeightedFit, check_design, fit_at, q_profile, residual_tau2
from treering.pooling.quadrature import Array
from treering.terms import IntervalMethod, PoolingModel, Tau2

INTERCEPT = "intercept"


@dataclass(frozen=True, slots=True)
class Coefficient:
    """One coefficient on the analysis scale, per unit of its covariate."""

    name: str
    estimate: float
    standard_error: float
    ci_low: float
    ci_high: float
    statistic: float
    p: float


@dataclass(frozen=True, slots=True)
class MetaRegression:
    """Result of a meta-regression.

    Attributes
    ----------
    coefficients : tuple of Coefficient
        Intercept first.
    covariance : ndarray, shape (p, p)
        Covariance of the coefficients as used for the intervals.
    tau2, tau2_low, tau2_high : float
        Residual between-trial variance with its Q-profile interval.
    tau2_without : float
        Between-trial variance without covariates, same estimator.
    r2 : float or None
        Share of ``tau2_without`` that the covariates account for, cut at 0; None when it is 0.
    q, q_df, q_p : float
        Residual heterogeneity (weights without tau2).
    test, test_df, test_residual_df, test_p : float
        Joint test of all covariates: F with two degrees of freedom, or chi-square when
        ``test_residual_df`` is None.
    df : int
        Residual degrees of freedom.
    k : int
        Number of trials.
    model, tau2_method, interval : str
        What was fitted.
    level : float
        Confidence level.
    """

    coefficients: tuple[Coefficient, ...]
    covariance: Array
    tau2: float
    tau2_low: float
    tau2_high: float
    tau2_without: float
    r2: float | None
    q: float
    q_df: int
    q_p: float
    test: float
    test_df: int
    test_residual_df: int | None
    test_p: float
    df: int
    k: int
    model: str
    tau2_method: str
    interval: str
    level: float


Covariates = pd.DataFrame | Mapping[str, Sequence[float]]


def _matrix(covariates: Covariates, labels: Sequence[object]) -> tuple[tuple[str, ...], Array]:
    """Design matrix with an intercept; every entry must be a finite number."""
    try:
        frame = pd.DataFrame(covariates)
    except (TypeError, ValueError) as error:
        raise AnalysisError("Covariates must be columns of equal length.", found=str(error)) from error
    if frame.shape[1] == 0:
        raise AnalysisError("A meta-regression needs at least one covariate.")
    if len(frame) != len(labels):
        raise AnalysisError(
            "Covariates and estimates differ in length.", found=len(frame), expected=len(labels)
        )
    columns = [np.ones(len(frame))]
    for name in frame.columns:
        if frame[name].dtype.kind in "Mm":  # their numbers are nanoseconds, and a gap among them a number too
            raise AnalysisError(
                f"The covariate {name} is a date.", next_step="Give it as a number, for example the year."
            )
        values = pd.to_numeric(frame[name], errors="coerce").to_numpy(dtype=np.float64, na_value=np.nan)
        for label, value, raw in zip(labels, values, frame[name], strict=True):
            if not np.isfinite(value):
                raise AnalysisError(
                    f"The covariate {name} is not a finite number.",
                    trial=str(label),
                    found=raw,
                    next_step="For categories use a subgroup analysis.",
                )
        columns.append(values)
    return (INTERCEPT, *(str(name) for name in frame.columns)), np.column_stack(columns)


def inflation(fit: WeightedFit, df: int, interval: IntervalMethod) -> float:
    """Factor on the covariance asked for by the interval method.

    Parameters
    ----------
    fit : WeightedFit
        Fit at the estimated tau2.
    df : int
        Residual degrees of freedom.
    interval : IntervalMethod
        Which interval.

    Returns
    -------
    float

    Raises
    ------
    AnalysisError
        No residual is left for the Knapp-Hartung variance.
    """
    if interval is IntervalMethod.WALD:
        return 1.0
    s2 = fit.q / df
    if s2 == 0 and interval is IntervalMethod.KNAPP_HARTUNG:
        raise AnalysisError(
            "The trials lie exactly on the regression, so its Knapp-Hartung variance is zero.",
            next_step="Use the modified Knapp-Hartung interval.",
        )
    return max(1.0, s2) if interval is IntervalMethod.MODIFIED_KNAPP_HARTUNG else s2


def meta_regression(
    estimates: ArrayLike,
    variances: ArrayLike,
    covariates: Covariates,
    *,
    model: str = "random",
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
) -> MetaRegression:
    """Regress trial effects on covariates.

    Parameters
    ----------
    estimates, variances : array-like, shape (k,)
        Trial effects on the analysis scale and their variances.
    covariates : DataFrame or mapping of name to sequence
        Numbers, one row per trial; an intercept is added.
    model : str
        "random" or "common" (tau2 fixed at 0, ordinary tests).
    tau2 : str
        "reml", "ml", "paule-mandel", "dersimonian-laird" or "hedges".
    interval : str
        "modified-knapp-hartung", "knapp-hartung" or "wald".
    level : float
        Confidence level.

    Returns
    -------
    MetaRegression

    Raises
    ------
    AnalysisError
        Bad numbers (trial and field named), too few trials, covariates that determine each other.
    """
    y, v = check_effects(estimates, variances)
    same_trials(estimates, covariates, "estimates and covariates")
    kind, method = choose(PoolingModel, model, "model"), choose(Tau2, tau2, "tau2")
    chosen, level = choose(IntervalMethod, interval, "interval"), check_level(level)
    names, x = _matrix(covariates, trial_labels(estimates, y.size))
    design = Design(y, v, x)
    check_design(design, names)
    if kind is PoolingModel.COMMON:
        chosen, estimate, without = IntervalMethod.WALD, 0.0, 0.0
    else:
        estimate = residual_tau2(design, method)
        without = residual_tau2(Design(y, v, x[:, :1]), method)
    fit, plain = fit_at(design, estimate), fit_at(design, 0.0)
    covariance = fit.covariance * inflation(fit, design.df, chosen)
    low, high = q_profile(design, level)
    test, residual_df, test_p = joint_test(fit.coefficients[1:], covariance[1:, 1:], design.df, chosen)
    return MetaRegression(
        coefficients=coefficients(names, fit.coefficients, covariance, design.df, chosen, level),
        covariance=covariance,
        tau2=estimate,
        tau2_low=low,
        tau2_high=high,
        tau2_without=without,
        r2=None if without == 0 else max(0.0, 1 - estimate / without),
        q=plain.q,
        q_df=design.df,
        q_p=float(stats.chi2.sf(plain.q, design.df)),
        test=test,
        test_df=len(names) - 1,
        test_residual_df=residual_df,
        test_p=test_p,
        df=design.df,
        k=y.size,
        model=kind.value,
        tau2_method=method.value if kind is PoolingModel.RANDOM else "none",
        interval=chosen.value,
        level=level,
    )


def coefficients(
    names: Sequence[str],
    values: Array,
    covariance: Array,
    df: int,
    interval: IntervalMethod,
    level: float,
) -> tuple[Coefficient, ...]:
    """Intervals and tests of single coefficients.

    Parameters
    ----------
    names : sequence of str, length p
        Names.
    values : ndarray, shape (p,)
        Estimates.
    covariance : ndarray, shape (p, p)
        Covariance, inflated already.
    df : int
        Residual degrees of freedom, used unless the interval is "wald".
    interval : IntervalMethod
        Which interval.
    level : float
        Confidence level.

    Returns
    -------
    tuple of Coefficient
    """
    law = stats.norm if interval is IntervalMethod.WALD else stats.t(df)
    quantile, errors = float(law.ppf(0.5 + level / 2)), np.sqrt(np.diag(covariance))
    rows = []
    for name, value, error in zip(names, values, errors, strict=True):
        b, se = float(value), float(error)
        p = float(2 * law.sf(abs(b / se)))
        rows.append(Coefficient(name, b, se, b - quantile * se, b + quantile * se, b / se, p))
    return tuple(rows)


def joint_test(
    values: Array, covariance: Array, df: int, interval: IntervalMethod
) -> tuple[float, int | None, float]:
    """Test that all given coefficients are zero.

    Parameters
    ----------
    values : ndarray, shape (m,)
        Coefficients.
    covariance : ndarray, shape (m, m)
        Their covariance, inflated already.
    df : int
        Residual degrees of freedom.
    interval : IntervalMethod
        "wald" gives the chi-square test, the others F.

    Returns
    -------
    tuple
        Statistic, residual degrees of freedom (None for chi-square), P value.
    """
    m = len(values)
    statistic = float(values @ np.linalg.solve(covariance, values))
    if interval is IntervalMethod.WALD:
        return statistic, None, float(stats.chi2.sf(statistic, m))
    return statistic / m, df, float(stats.f.sf(statistic / m, m, df))
