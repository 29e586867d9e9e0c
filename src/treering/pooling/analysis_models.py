"""Parts of the table analysis that fit models: tau2, Bayesian, one-stage, subgroups, regression, absolute."""

from __future__ import annotations

from dataclasses import replace
from functools import partial

from treering.errors import AnalysisError
from treering.pooling.absolute import AbsoluteEffect, absolute_effects
from treering.pooling.analysis_input import Inputs, Ledger
from treering.pooling.bayes import BayesianEffect, pool_bayesian
from treering.pooling.inverse_variance import pool
from treering.pooling.one_stage import OneStageEffect, pool_one_stage
from treering.pooling.one_stage_models import OneStageModel
from treering.pooling.priors import EMPIRICAL_PRIORS, HalfNormal, TauPrior
from treering.pooling.regression import MetaRegression, meta_regression
from treering.pooling.result import PooledEffect
from treering.pooling.subgroups import SubgroupAnalysis, subgroup_analysis
from treering.terms import Better, Measure, Tau2

#: Half-normal scale 0.5 for effects on a log or standardized scale (Friede et al. 2017, Res Synth Methods
#: 8:79, from memory). No scale fits outcomes in their own units, so there is no default for those.
DEFAULT_PRIOR = HalfNormal(0.5)
DEFAULT_SOURCE = "default, none was given; Friede et al. 2017, Res Synth Methods 8:79, from memory"
_UNIT_FREE = frozenset({Measure.STANDARDIZED_MEAN_DIFFERENCE})


def tau2_estimators(inputs: Inputs) -> dict[str, PooledEffect]:
    """Random-effects result by every estimator of tau2, with the planned interval.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.

    Returns
    -------
    dict of str to PooledEffect
    """
    plan = inputs.plan.random_effects
    return {method.value: pool(*inputs.numbers, **{**plan, "tau2": method}) for method in Tau2}


def bayesian(inputs: Inputs) -> BayesianEffect:
    """Bayesian result with the asked prior of tau, or the default one where a default makes sense.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.

    Returns
    -------
    BayesianEffect

    Raises
    ------
    AnalysisError
        When a prior must be given and is not.
    """
    plan = inputs.plan
    prior: TauPrior | str | None = plan.prior
    if prior is None:
        if not (inputs.ratio or inputs.measure in _UNIT_FREE):
            raise AnalysisError(
                f"A prior of tau for {inputs.measure} depends on the outcome's unit.",
                next_step="Give one, for example a half-normal with a scale in that unit.",
            )
        prior = DEFAULT_PRIOR
    found = pool_bayesian(
        *inputs.numbers,
        prior,
        better=plan.better or Better.LOWER,
        mid=plan.mid,
        level=plan.level,
    )
    # nobody chose a default
    return found if plan.prior is not None else replace(found, prior_source=DEFAULT_SOURCE)


def prior_warnings(inputs: Inputs) -> list[str]:
    """Sentences on a prior that was made for another scale, or only recalled.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.

    Returns
    -------
    list of str
    """
    prior = inputs.plan.prior
    if not isinstance(prior, str) or prior not in EMPIRICAL_PRIORS:
        return []
    entry, words = EMPIRICAL_PRIORS[prior], []
    fitting = {"log odds ratio": Measure.ODDS_RATIO}.get(entry.scale, Measure.STANDARDIZED_MEAN_DIFFERENCE)
    if inputs.measure is not fitting:
        words.append(f"The prior {prior} describes {entry.scale}s; the analysis is on {inputs.measure}.")
    if entry.from_memory:
        words.append(f"The numbers of the prior {prior} were recalled; check them against {entry.source}.")
    return words


def one_stage(inputs: Inputs, ledger: Ledger) -> dict[str, OneStageEffect]:
    """Fit all one-stage models; the reason of each that could not be fitted goes to the ledger.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.
    ledger : Ledger
        Where reasons are kept.

    Returns
    -------
    dict of str to OneStageEffect
    """
    reason = inputs.why_no_counts
    if not reason and inputs.plan.one_stage == "never":
        reason = "not asked for"
    if not reason and inputs.plan.one_stage == "rare" and not inputs.rare:
        reason = "events are not rare: no arm without events, and both risks at 5% or more"
    if reason:
        ledger.not_done["one_stage"] = reason
        return {}
    found = {}
    for model in OneStageModel:
        fit = ledger.attempt(
            f"one_stage {model.value}",
            "",
            partial(pool_one_stage, inputs.table, model, level=inputs.plan.level),
        )
        if fit is not None:
            found[model.value] = fit
    return found


def subgroups(inputs: Inputs) -> SubgroupAnalysis:
    """Subgroup analysis over the column that the plan names.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.

    Returns
    -------
    SubgroupAnalysis
    """
    plan = inputs.plan
    return subgroup_analysis(
        *inputs.numbers,
        inputs.used[plan.subgroup],
        tau2=plan.tau2,
        between_variance=plan.between_variance,
        interval=plan.interval,
        level=plan.level,
    )


def regression(inputs: Inputs) -> MetaRegression:
    """Meta-regression on the columns that the plan names.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.

    Returns
    -------
    MetaRegression

    Raises
    ------
    AnalysisError
        When a column is missing.
    """
    plan = inputs.plan
    missing = [name for name in plan.covariates if name not in inputs.table.columns]
    if missing:
        raise AnalysisError("The table lacks a covariate.", found=missing)
    return meta_regression(
        *inputs.numbers,
        inputs.used[list(plan.covariates)],
        tau2=plan.tau2,
        interval=plan.interval,
        level=plan.level,
    )


def absolute(inputs: Inputs, headline: PooledEffect) -> tuple[AbsoluteEffect, ...]:
    """Events per 1000 people at the comparator risks of the plan.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.
    headline : PooledEffect
        The pooled effect that is translated.

    Returns
    -------
    tuple of AbsoluteEffect
    """
    return absolute_effects(headline, inputs.measure, inputs.plan.comparator_risk)
