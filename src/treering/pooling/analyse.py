"""Everything about one table of trials: the pure function behind ``treering pool FILE.csv``."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from scipy.stats import norm

from treering.pooling import analysis_classical as classical
from treering.pooling import analysis_models as models
from treering.pooling.absolute import AbsoluteEffect
from treering.pooling.analysis_input import Inputs, Ledger, Plan, check_words, prepare, tuple_of
from treering.pooling.analysis_result import TableAnalysis, TrialEffect
from treering.pooling.influence import influence, leave_one_out
from treering.pooling.inverse_variance import pool
from treering.pooling.one_stage import OneStageEffect
from treering.pooling.plain import plain
from treering.pooling.priors import TauPrior
from treering.pooling.result import PooledEffect
from treering.terms import Measure


def analyse_table(
    table: pd.DataFrame,
    measure: str,
    *,
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    prediction_df: str = "k-2",
    correction: str = "none",
    amount: float = 0.5,
    subgroup: str = "subgroup",
    between_variance: str = "separate",
    covariates: Sequence[str] = (),
    order: str | None = None,
    comparator_risk: float | Sequence[float] | None = None,
    prior: TauPrior | str | None = None,
    better: str | None = None,
    mid: float | None = None,
    one_stage: str = "rare",
    force_small_study: bool = False,
) -> TableAnalysis:
    """Analyse one table of trials in every way that fits its measure.

    Parameters
    ----------
    table : DataFrame
        One row per trial; columns as for ``treering.effects.effect_sizes``, and optionally ``trial``, the
        subgroup column, covariates and a column to order by.
    measure : str
        A ``treering.terms.Measure``.
    tau2, interval, level, prediction_df : str, str, float, str
        Planned random-effects analysis; see ``pool``.
    correction, amount : str, float
        Zero cells; see ``effect_sizes``.
    subgroup : str
        Column with the subgroup; used when the table has it.
    between_variance : str
        "separate" or "common" tau2 of the subgroups.
    covariates : sequence of str
        Columns for a meta-regression.
    order : str, optional
        Column by which trials are added up; "date" or "year" when the table has it, else the row order.
    comparator_risk : float or sequence of float, optional
        Risks at which absolute effects are stated.
    prior : TauPrior or str, optional
        Prior of tau; half-normal with scale 0.5 for ratios and standardized mean differences by default.
    better : str, optional
        "lower" or "higher".
    mid : float, optional
        Minimally important difference, a positive distance on the analysis scale.
    one_stage : str
        "rare" (when an arm has no event or a risk is below 5%), "always" or "never".
    force_small_study : bool
        Do small-study tests and trim and fill with fewer than ten trials too; they are marked.

    Returns
    -------
    TableAnalysis

    Raises
    ------
    AnalysisError
        Faulty numbers (trial and field named) or an unknown option.
    """
    plan = Plan(
        tau2=str(tau2),
        interval=str(interval),
        level=level,
        prediction_df=prediction_df,
        correction=str(correction),
        amount=amount,
        subgroup=subgroup,
        between_variance=between_variance,
        covariates=tuple(covariates),
        order=order,
        comparator_risk=tuple_of(comparator_risk),
        prior=prior,
        better=better,
        mid=mid,
        one_stage=one_stage,
        force_small_study=force_small_study,
    )
    check_words(plan)
    return _analyse(prepare(table, measure, plan))


def _analyse(inputs: Inputs) -> TableAnalysis:
    """Compute every part."""
    plan, sizes, ledger = inputs.plan, inputs.sizes, Ledger()
    k = len(sizes)
    rare = models.one_stage(inputs, ledger)
    small, filled = classical.small_study_parts(inputs, ledger)
    empty = "" if k else "no trial has a usable effect on this measure"
    single = empty or ("" if k > 1 else "one trial only")
    common, random = _both_models(inputs) if k else (None, None)
    if empty:
        ledger.not_done |= {"common": empty, "random": empty}
    return TableAnalysis(
        measure=inputs.measure.value,
        scale=str(sizes.attrs["scale"]),
        level=plan.level,
        options=plain(plan),
        trials=_trials(inputs, common, random),
        left_out=inputs.left_out,
        common=common,
        random=random,
        estimators=ledger.attempt("estimators", single, lambda: models.tau2_estimators(inputs)) or {},
        mantel_haenszel=classical.mantel_haenszel(inputs, ledger),
        peto=classical.peto(inputs, ledger),
        subgroups=ledger.attempt(
            "subgroups", _why_no_subgroups(inputs) or single, lambda: models.subgroups(inputs)
        ),
        regression=ledger.attempt(
            "regression",
            empty or ("" if plan.covariates else "no covariate named"),
            lambda: models.regression(inputs),
        ),
        leave_one_out=ledger.attempt(
            "leave_one_out", single, lambda: leave_one_out(*inputs.numbers, **plan.random_effects)
        ),
        influence=ledger.attempt("influence", single, lambda: influence(*inputs.numbers, tau2=plan.tau2)),
        small_study=small,
        trim_and_fill=filled,
        cumulative=ledger.attempt("cumulative", empty, lambda: classical.added_up(inputs)),
        bayesian=ledger.attempt("bayesian", empty, lambda: models.bayesian(inputs)),
        one_stage=rare,
        absolute=_absolute(inputs, random, ledger),
        not_done=ledger.not_done,
        warnings=_warnings(inputs, random, rare),
    )


def _both_models(inputs: Inputs) -> tuple[PooledEffect, PooledEffect]:
    """Common-effect and planned random-effects result."""
    common = pool(*inputs.numbers, model="common", level=inputs.plan.level)
    return common, pool(*inputs.numbers, **inputs.plan.random_effects)


def _trials(
    inputs: Inputs, common: PooledEffect | None, random: PooledEffect | None
) -> tuple[TrialEffect, ...]:
    """Effects and shares of the usable trials."""
    if common is None or random is None:
        return ()
    quantile = float(norm.ppf(0.5 + inputs.plan.level / 2))
    attrs = inputs.sizes.attrs
    corrected, routes = {str(t) for t in attrs["corrected"]}, {str(t): r for t, r in attrs["reported"]}
    rows = []
    for i, (trial, row) in enumerate(inputs.sizes.iterrows()):
        estimate, error = float(row["estimate"]), float(np.sqrt(row["variance"]))
        rows.append(
            TrialEffect(
                trial=str(trial),
                estimate=estimate,
                variance=float(row["variance"]),
                standard_error=error,
                ci_low=estimate - quantile * error,
                ci_high=estimate + quantile * error,
                weight_common=float(common.weights[i]),
                weight_random=float(random.weights[i]),
                corrected=str(trial) in corrected,
                route=routes.get(str(trial), "as planned"),
            )
        )
    return tuple(rows)


def _why_no_subgroups(inputs: Inputs) -> str:
    """Reason why there is no subgroup analysis, empty when there is one."""
    column = inputs.plan.subgroup
    if column not in inputs.table.columns:
        return f"the table has no column {column}"
    return ""


def _absolute(inputs: Inputs, headline: PooledEffect | None, ledger: Ledger) -> tuple[AbsoluteEffect, ...]:
    """Absolute effects of the random-effects result, or the reason why there are none."""
    reason = "" if inputs.plan.comparator_risk else "no comparator risk given"
    if headline is None:
        ledger.not_done["absolute"] = reason or "there is no pooled effect"
        return ()
    return ledger.attempt("absolute", reason, lambda: models.absolute(inputs, headline)) or ()


def _warnings(
    inputs: Inputs, headline: PooledEffect | None, rare: dict[str, OneStageEffect]
) -> tuple[str, ...]:
    """Sentences that belong to the numbers."""
    attrs, words = inputs.sizes.attrs, []
    if inputs.left_out:
        names = ", ".join(str(row.trial) for row in inputs.left_out)
        words.append(f"Left out of the pooled effect, still listed: {names}.")
    if attrs["corrected"]:
        words.append(
            f"Zero cells corrected ({attrs['correction']}): {', '.join(str(t) for t in attrs['corrected'])}."
        )
    if attrs["reported"]:
        shown = ", ".join(f"{trial} ({route})" for trial, route in attrs["reported"])
        words.append(f"Effect taken as reported, not computed from the arms: {shown}.")
    words += headline.remarks if headline else ()
    if inputs.plan.better is None:
        words.append("No good direction was given: 'benefit' in the Bayesian part means a lower value.")
    if rare and inputs.measure is not Measure.ODDS_RATIO:
        words.append("The one-stage models speak of the odds ratio, whatever the measure of the table.")
    return tuple(words + models.prior_warnings(inputs))
