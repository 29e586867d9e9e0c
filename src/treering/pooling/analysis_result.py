"""The result of a table analysis."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import pandas as pd

from treering.effects import LeftOut
from treering.pooling.absolute import AbsoluteEffect
from treering.pooling.analysis_classical import Cumulative, SmallStudy
from treering.pooling.bayes import BayesianEffect
from treering.pooling.one_stage import OneStageEffect
from treering.pooling.plain import plain, with_natural
from treering.pooling.regression import MetaRegression
from treering.pooling.result import PooledEffect
from treering.pooling.subgroups import SubgroupAnalysis
from treering.pooling.trim_fill import TrimAndFill

_NATURAL = ("common", "random", "mantel_haenszel", "peto", "bayesian")


@dataclass(frozen=True, slots=True)
class TrialEffect:
    """One trial's effect on the analysis scale, its interval and its share of both pooled effects."""

    trial: str
    estimate: float
    variance: float
    standard_error: float
    ci_low: float
    ci_high: float
    weight_common: float
    weight_random: float
    corrected: bool
    route: str


@dataclass(frozen=True, slots=True)
class TableAnalysis:
    """All results of one table; a part that could not be computed is None and has its reason in ``not_done``.

    Attributes
    ----------
    measure, scale : str
        The measure; "log" or "natural" analysis scale.
    level : float
        Confidence level.
    options : dict
        What was asked for.
    trials : tuple of TrialEffect
        Trials with a usable effect.
    left_out : tuple of LeftOut
        The others with the reason.
    common, random : PooledEffect or None
        Inverse-variance results; ``random`` is the headline and holds heterogeneity and prediction.
    estimators : dict of str to PooledEffect
        Random effects by every estimator of tau2.
    mantel_haenszel, peto : PooledEffect or None
        From the counts; Peto's is an odds ratio whatever the measure.
    subgroups : SubgroupAnalysis or None
        When the table has the subgroup column.
    regression : MetaRegression or None
        When covariates are named.
    leave_one_out : DataFrame or None
        The random-effects result without each trial.
    influence : DataFrame or None
        Influence of each trial.
    small_study : SmallStudy or None
        Tests for small-study effects, with ten trials or more unless forced.
    trim_and_fill : TrimAndFill or None
        Trim and fill in the common-effect model, under the same condition.
    cumulative : Cumulative or None
        Pooled effect as trials are added.
    bayesian : BayesianEffect or None
        Posterior.
    one_stage : dict of str to OneStageEffect
        Rare-event models.
    absolute : tuple of AbsoluteEffect
        Events per 1000 people.
    not_done : dict of str to str
        Part and reason.
    warnings : tuple of str
        What a reader of the numbers must also read.
    """

    measure: str
    scale: str
    level: float
    options: dict[str, Any]
    trials: tuple[TrialEffect, ...]
    left_out: tuple[LeftOut, ...]
    common: PooledEffect | None
    random: PooledEffect | None
    estimators: dict[str, PooledEffect]
    mantel_haenszel: PooledEffect | None
    peto: PooledEffect | None
    subgroups: SubgroupAnalysis | None
    regression: MetaRegression | None
    leave_one_out: pd.DataFrame | None
    influence: pd.DataFrame | None
    small_study: SmallStudy | None
    trim_and_fill: TrimAndFill | None
    cumulative: Cumulative | None
    bayesian: BayesianEffect | None
    one_stage: dict[str, OneStageEffect]
    absolute: tuple[AbsoluteEffect, ...]
    not_done: dict[str, str]
    warnings: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """Return the analysis as plain JSON values.

        Returns
        -------
        dict
            Same names as the attributes; pooled effects carry ``natural`` with estimate and limits on the
            natural scale; NaN and infinity are None.
        """
        whole: dict[str, Any] = plain(self)
        ratio = self.scale == "log"
        for name in _NATURAL:
            if whole[name] is not None:
                whole[name] = with_natural(whole[name], ratio=ratio or name == "peto")
        for name in ("trials", "leave_one_out"):
            whole[name] = whole[name] and [with_natural(row, ratio=ratio) for row in whole[name]]
        if whole["cumulative"] is not None:
            steps = whole["cumulative"]["steps"]
            whole["cumulative"]["steps"] = [with_natural(row, ratio=ratio) for row in steps]
        for name in ("estimators", "one_stage"):
            logs = ratio or name == "one_stage"
            whole[name] = {key: with_natural(block, ratio=logs) for key, block in whole[name].items()}
        if whole["trim_and_fill"] is not None:
            whole["trim_and_fill"]["pooled"] = with_natural(whole["trim_and_fill"]["pooled"], ratio=ratio)
        if whole["subgroups"] is not None:
            groups = whole["subgroups"]["groups"]
            whole["subgroups"]["groups"] = [with_natural(group, ratio=ratio) for group in groups]
        return whole
