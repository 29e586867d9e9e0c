"""Do subgroups of trials differ? Effects per subgroup and the test of interaction.

The question is always answered by the interaction test, never by one subgroup being "significant" and
another not (Altman and Bland 2003, BMJ 326:219). The common-effect Q splits exactly into a part within and a
part between subgroups (Hedges and Olkin 1985); with random effects the groups are compared by their own
pooled effects (separate tau2) or in one model (common tau2).

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd
from scipy import stats

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike, same_trials, trial_labels
from treering.pooling.checks import check_effects, check_level, choose
from treering.pooling.interaction import Interaction, interaction_of
from treering.pooling.inverse_variance import pool
from treering.pooling.moderated import Design, check_design, fit_at, residual_tau2
from treering.pooling.quadrature import Array
from treering.pooling.regression import coefficients, inflation, joint_test
from treering.terms import IntervalMethod, PoolingModel, Tau2


@dataclass(frozen=True, slots=True)
class SubgroupEffect:
    """Pooled effect of one subgroup on the analysis scale.

    ``tau2`` is NaN only for a subgroup of one trial with separate tau2 (not estimable).
    """

    label: str
    k: int
    trials: tuple[str, ...]
    estimate: float
    standard_error: float
    ci_low: float
    ci_high: float
    p: float
    tau2: float
    q: float
    i2: float


@dataclass(frozen=True, slots=True)
class SubgroupAnalysis:
    """Effects per subgroup and their comparison.

    Attributes
    ----------
    groups : tuple of SubgroupEffect
        In order of first appearance.
    test, test_df, test_residual_df, test_p : float
        Test of interaction: chi-square, or F when ``test_residual_df`` is given.
    test_name : str
        Which test, in words.
    q_total, q_within, q_between : float
        Partition of the common-effect Q.
    q_between_df, q_within_df : int
        Their degrees of freedom.
    q_between_p, q_within_p : float
        Their P values (NaN for a part without degrees of freedom).
    difference : Interaction or None
        With two subgroups: first minus second.
    model, tau2_method, between_variance, interval : str
        What was fitted; ``between_variance`` is "separate" or "common".
    level : float
        Confidence level.
    remarks : tuple of str
        What a reader of the numbers must also read.
    """

    groups: tuple[SubgroupEffect, ...]
    test: float
    test_df: int
    test_residual_df: int | None
    test_p: float
    test_name: str
    q_total: float
    q_within: float
    q_between: float
    q_between_df: int
    q_within_df: int
    q_between_p: float
    q_within_p: float
    difference: Interaction | None
    model: str
    tau2_method: str
    between_variance: str
    interval: str
    level: float
    remarks: tuple[str, ...]


def _positions(
    groups: Sequence[object] | pd.Series, trials: Sequence[object]
) -> tuple[list[str], npt.NDArray[np.int_]]:
    """Names of the subgroups in order of appearance, and each trial's position among them."""
    try:
        values = list(groups)
    except TypeError:
        raise AnalysisError("Subgroups must be one list of names.", found=type(groups).__name__) from None
    if len(values) != len(trials):
        raise AnalysisError(
            "Subgroups and estimates differ in length.", found=len(values), expected=len(trials)
        )
    for trial, value in zip(trials, values, strict=True):
        if value is None or value != value or str(value).strip() == "":
            raise AnalysisError(
                "The subgroup is missing.", trial=str(trial), expected="the name of a subgroup"
            )
    names = list(dict.fromkeys(str(value) for value in values))
    if len(names) < 2:
        raise AnalysisError("A subgroup analysis needs at least two subgroups.", found=names)
    return names, np.array([names.index(str(value)) for value in values])


def subgroup_analysis(
    estimates: ArrayLike,
    variances: ArrayLike,
    groups: Sequence[object] | pd.Series,
    *,
    model: str = "random",
    tau2: str = "reml",
    between_variance: str = "separate",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
) -> SubgroupAnalysis:
    """Pool within subgroups and test whether they differ.

    Parameters
    ----------
    estimates, variances : array-like, shape (k,)
        Trial effects on the analysis scale and their variances.
    groups : sequence, length k
        Subgroup of each trial.
    model : str
        "random" or "common".
    tau2 : str
        Estimator of the between-trial variance.
    between_variance : str
        "separate": every subgroup has its own tau2 and the pooled effects are compared by chi-square, with
        their ordinary variances. "common": one tau2 within subgroups (a regression on subgroup indicators);
        the interaction test is then F with a Knapp-Hartung interval, chi-square with "wald".
    interval : str
        "modified-knapp-hartung", "knapp-hartung" or "wald".
    level : float
        Confidence level.

    Returns
    -------
    SubgroupAnalysis

    Raises
    ------
    AnalysisError
        Bad numbers or a missing subgroup (the trial is named), fewer than two subgroups, or too few trials
        for a common tau2.
    """
    y, v = check_effects(estimates, variances)
    same_trials(estimates, groups, "estimates and groups")
    trials = trial_labels(estimates, y.size)
    names, where = _positions(groups, trials)
    kind, method = choose(PoolingModel, model, "model"), choose(Tau2, tau2, "tau2")
    chosen, level = choose(IntervalMethod, interval, "interval"), check_level(level)
    if between_variance not in ("separate", "common"):
        raise AnalysisError(
            "between_variance is not a known word.", found=between_variance, expected="separate or common"
        )
    data = _Data(y, v, where, names, trials, level)
    random = kind is PoolingModel.RANDOM
    joint = random and between_variance == "common"
    rows, test = _one_variance(data, method, chosen) if joint else _own_variances(data, kind, method, chosen)
    q_total, q_within = _partition(data)
    g = len(names)
    return SubgroupAnalysis(
        groups=rows,
        test=test.statistic,
        test_df=g - 1,
        test_residual_df=test.residual_df,
        test_p=test.p,
        test_name=test.name,
        q_total=q_total,
        q_within=q_within,
        q_between=max(q_total - q_within, 0.0),
        q_between_df=g - 1,
        q_within_df=y.size - g,
        q_between_p=float(stats.chi2.sf(max(q_total - q_within, 0.0), g - 1)),
        q_within_p=float(stats.chi2.sf(q_within, y.size - g)) if y.size > g else math.nan,
        difference=test.difference,
        model=kind.value,
        tau2_method=method.value if random else "none",
        between_variance=between_variance if random else "none",
        interval=chosen.value if random else IntervalMethod.WALD.value,
        level=level,
        remarks=_remarks(rows, joint),
    )


@dataclass(frozen=True, slots=True)
class _Data:
    """Checked trials with the position of each one's subgroup."""

    y: Array
    v: Array
    where: npt.NDArray[np.int_]
    names: list[str]
    trials: Sequence[object]
    level: float

    def members(self, group: int) -> tuple[str, ...]:
        return tuple(str(t) for t, g in zip(self.trials, self.where, strict=True) if g == group)

    def of(self, group: int) -> tuple[Array, Array]:
        inside = self.where == group
        return self.y[inside], self.v[inside]


@dataclass(frozen=True, slots=True)
class _Test:
    """Comparison of the subgroups."""

    statistic: float
    residual_df: int | None
    p: float
    name: str
    difference: Interaction | None


def _partition(data: _Data) -> tuple[float, float]:
    """Common-effect Q over all trials, and the sum of the subgroups' own Q."""

    def q(y: Array, v: Array) -> float:
        return fit_at(Design(y, v, np.ones((y.size, 1))), 0.0).q

    return q(data.y, data.v), sum(q(*data.of(group)) for group in range(len(data.names)))


def _own_variances(
    data: _Data, kind: PoolingModel, method: Tau2, interval: IntervalMethod
) -> tuple[tuple[SubgroupEffect, ...], _Test]:
    """Pool each subgroup by itself and compare the results by chi-square."""
    rows, precision = [], []
    for group, name in enumerate(data.names):
        y, v = data.of(group)
        one = pool(y, v, model=kind, tau2=method, interval=interval, level=data.level)
        precision.append(float(np.sum(1 / (v + (0.0 if math.isnan(one.tau2) else one.tau2)))))
        rows.append(
            SubgroupEffect(
                label=name,
                k=one.k,
                trials=data.members(group),
                estimate=one.estimate,
                standard_error=one.standard_error,
                ci_low=one.ci_low,
                ci_high=one.ci_high,
                p=one.p,
                tau2=one.tau2,
                q=one.q,
                i2=one.i2,
            )
        )
    # the ordinary precision also under Knapp-Hartung: the chi-square law belongs to it
    w, theta = np.array(precision), np.array([row.estimate for row in rows])
    statistic = float(w @ (theta - w @ theta / w.sum()) ** 2)
    difference = None
    if len(rows) == 2:
        difference = interaction_of(
            float(theta[0] - theta[1]), math.sqrt(1 / w[0] + 1 / w[1]), level=data.level
        )
    kinds = "common effect within subgroups" if kind is PoolingModel.COMMON else "separate tau2"
    p = float(stats.chi2.sf(statistic, len(rows) - 1))
    return tuple(rows), _Test(statistic, None, p, f"chi-square, {kinds}", difference)


def _one_variance(
    data: _Data, method: Tau2, interval: IntervalMethod
) -> tuple[tuple[SubgroupEffect, ...], _Test]:
    """Regress on subgroup indicators without intercept, one tau2 for all subgroups."""
    design = Design(data.y, data.v, np.eye(len(data.names))[data.where])
    check_design(design, tuple(data.names))
    tau2 = residual_tau2(design, method)
    fit = fit_at(design, tau2)
    covariance = fit.covariance * inflation(fit, design.df, interval)
    found = coefficients(data.names, fit.coefficients, covariance, design.df, interval, data.level)
    rows = []
    for group, row in enumerate(found):
        alone = pool(*data.of(group), model=PoolingModel.COMMON)
        rows.append(
            SubgroupEffect(
                label=row.name,
                k=alone.k,
                trials=data.members(group),
                estimate=row.estimate,
                standard_error=row.standard_error,
                ci_low=row.ci_low,
                ci_high=row.ci_high,
                p=row.p,
                tau2=tau2,
                q=alone.q,
                i2=alone.i2,
            )
        )
    contrast = np.column_stack([-np.ones(len(rows) - 1), np.eye(len(rows) - 1)])
    moved, spread = contrast @ fit.coefficients, contrast @ covariance @ contrast.T
    statistic, residual_df, p = joint_test(moved, spread, design.df, interval)
    difference = None
    if len(rows) == 2:
        error = math.sqrt(float(spread[0, 0]))
        difference = interaction_of(-float(moved[0]), error, level=data.level, df=residual_df)
    kind = "chi-square" if residual_df is None else "F"
    return tuple(rows), _Test(statistic, residual_df, p, f"{kind}, common tau2", difference)


def _remarks(rows: tuple[SubgroupEffect, ...], joint: bool) -> tuple[str, ...]:
    """Sentences on what the subgroups are too small to say."""
    remarks = ["A difference between subgroups of trials is an observation, not a randomised comparison."]
    single = [row.label for row in rows if row.k == 1]
    if single and not joint:
        remarks.append(
            f"With one trial the between-trial variance is not estimable: {', '.join(single)}. That trial "
            "enters the interaction test with its own variance only, so differences are found too easily."
        )
    if min(row.k for row in rows) < 5 and not joint:
        remarks.append(
            "Separate between-trial variances are poorly estimated in subgroups of fewer than five trials; a "
            "common one is usually preferred there (common practice)."
        )
    return tuple(remarks)
