"""One-stage models for binary outcomes with few events.

Each fits the counts themselves, so no cell is ever "corrected". They differ in what a trial without events
in either arm can say:

``hypergeometric-normal``
    Conditional on each trial's total of events. Log odds ratios normal over trials. A double-zero trial has
    one possible table and adds nothing.
``binomial-normal-fixed-intercepts``
    Two binomials per trial, one free intercept per trial (profiled out), log odds ratios normal over
    trials. The best intercept of a double-zero trial lies at minus infinity, where it adds nothing.
``binomial-normal-random-intercepts``
    As before with intercepts normal over trials, independent of the effects. A double-zero trial counts.
``beta-binomial``
    Risks beta-distributed over trials, per arm; comparison within trials given up. A double-zero trial
    counts.

Sources: Stijnen, Hamza and Ozdemir 2010, Stat Med 29:3046; Jackson et al. 2018, Stat Med 37:1059 (models 4
and 5); Kuss 2015, Stat Med 34:1097.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy.special import expit, gammaln
from scipy.stats import norm

from treering.errors import AnalysisError
from treering.pooling.binomial import Arms
from treering.pooling.checks import check_level, choose
from treering.pooling.counts import read_counts
from treering.pooling.likelihood_fit import Fit, Problem, profile_interval
from treering.pooling.one_stage_models import OneStageModel, fit_model, refuse_infinite
from treering.terms import Measure


@dataclass(frozen=True, slots=True)
class OneStageEffect:
    """Result of a one-stage model.

    Attributes
    ----------
    model : str
        Name of the model.
    measure : str
        "odds-ratio"; for the beta-binomial also "risk-ratio" or "risk-difference".
    estimate, standard_error, ci_low, ci_high : float
        On the analysis scale (log for ratios).
    interval : str
        "wald" (normal quantile) or "profile-likelihood".
    level : float
        Confidence level.
    z, p : float
        Wald test of no effect, two-sided.
    tau2 : float or None
        Variance of the log odds ratio over trials, maximum likelihood; None for the beta-binomial.
    intercept, intercept_variance : float or None
        Mean and variance of the trial intercepts (logit scale, midway between the arms); only with random
        intercepts.
    correlation : float or None
        Intra-class correlation of the beta-binomial, 0 when the risks do not vary.
    log_likelihood : float
        At the maximum, constants included; for the conditional model that of the conditional likelihood.
    k : int
        Trials given.
    k_informative : int
        Trials that can move the estimate in this model.
    k_double_zero : int
        Trials without an event in either arm.
    nodes : int or None
        Quadrature nodes per dimension.
    """

    model: str
    measure: str
    estimate: float
    standard_error: float
    ci_low: float
    ci_high: float
    interval: str
    level: float
    z: float
    p: float
    tau2: float | None
    intercept: float | None
    intercept_variance: float | None
    correlation: float | None
    log_likelihood: float
    k: int
    k_informative: int
    k_double_zero: int
    nodes: int | None


def _constant(arms: Arms) -> float:
    """Sum of the log binomial coefficients of all arms."""
    parts = ((arms.events_1, arms.total_1), (arms.events_2, arms.total_2))
    return float(sum(np.sum(gammaln(n + 1) - gammaln(e + 1) - gammaln(n - e + 1)) for e, n in parts))


def _measured(fit: Fit, measure: Measure) -> tuple[float, float]:
    """Estimate and standard error of a beta-binomial fit on the asked measure (delta method)."""
    p2, p1 = float(expit(fit.x[0])), float(expit(fit.x[0] + fit.x[1]))
    d2, d1 = p2 * (1 - p2), p1 * (1 - p1)
    if measure is Measure.ODDS_RATIO:
        value, slope = float(fit.x[1]), np.array([0.0, 1.0])
    elif measure is Measure.RISK_RATIO:
        value, slope = float(np.log(p1 / p2)), np.array([(1 - p1) - (1 - p2), 1 - p1])
    else:
        value, slope = p1 - p2, np.array([d1 - d2, d1])
    covariance = fit.covariance[:2, :2]
    return value, float(np.sqrt(slope @ covariance @ slope))


def pool_one_stage(
    table: pd.DataFrame,
    model: str | OneStageModel = OneStageModel.HYPERGEOMETRIC_NORMAL,
    *,
    measure: str | Measure = Measure.ODDS_RATIO,
    interval: str = "wald",
    level: float = 0.95,
    nodes: int | None = None,
) -> OneStageEffect:
    """Pool binary counts by a one-stage model.

    Parameters
    ----------
    table : DataFrame
        Columns ``intervention_events intervention_total comparator_events comparator_total``, one row per
        trial; optional ``trial`` with its name.
    model : str
        "hypergeometric-normal", "binomial-normal-fixed-intercepts", "binomial-normal-random-intercepts" or
        "beta-binomial"; see the module's description.
    measure : str
        "odds-ratio"; with the beta-binomial also "risk-ratio" or "risk-difference".
    interval : str
        "wald" or "profile-likelihood" (odds ratio only).
    level : float
        Confidence level.
    nodes : int, optional
        Quadrature nodes per dimension; by default 25 (hypergeometric), 15 (fixed intercepts) or 11
        (random intercepts, where there are two dimensions), and more where these are too few.

    Returns
    -------
    OneStageEffect
        The pooled effect on the analysis scale.

    Raises
    ------
    AnalysisError
        Bad counts, an unknown option, or an effect without a finite estimate.
    NotConvergedError
        When no proper maximum is found.
    """
    chosen, wanted = _options(model, measure, interval, level)
    x = read_counts(table, whole=chosen is OneStageModel.HYPERGEOMETRIC_NORMAL)
    arms = Arms(x.a, x.n1, x.c, x.n2)
    events, total = arms.events_1 + arms.events_2, arms.total_1 + arms.total_2
    informative = (
        (events > 0) & (events < total) if chosen.within_trial else np.ones(events.shape, dtype=bool)
    )
    if not informative.any():
        raise AnalysisError("No trial has both an event and a non-event: nothing to estimate.")
    used = arms.subset(informative)
    refuse_infinite(chosen, used)
    problem, fit, nodes = fit_model(chosen, used, nodes)
    estimate, error, low, high = _effect(chosen, wanted, problem, fit, interval, level)
    constant = 0.0 if chosen is OneStageModel.HYPERGEOMETRIC_NORMAL else _constant(arms)
    return OneStageEffect(
        model=chosen.value,
        measure=wanted.value,
        estimate=estimate,
        standard_error=error,
        ci_low=low,
        ci_high=high,
        interval=interval,
        level=level,
        z=estimate / error,
        p=float(2 * norm.sf(abs(estimate / error))),
        **_spread(chosen, fit),
        log_likelihood=fit.log_likelihood + constant,
        k=len(events),
        k_informative=int(informative.sum()),
        k_double_zero=int(np.sum(events == 0)),
        nodes=nodes,
    )


def _effect(
    model: OneStageModel, measure: Measure, problem: Problem, fit: Fit, interval: str, level: float
) -> tuple[float, float, float, float]:
    """Estimate, standard error and interval on the analysis scale of the measure."""
    position = 0 if model.within_trial else 1
    estimate, error = float(fit.x[position]), float(np.sqrt(fit.covariance[position, position]))
    if model is OneStageModel.BETA_BINOMIAL:
        estimate, error = _measured(fit, measure)
    if interval == "profile-likelihood":
        return estimate, error, *profile_interval(problem, fit, position, level)
    half = float(norm.ppf(0.5 + level / 2)) * error
    return estimate, error, estimate - half, estimate + half


def _spread(model: OneStageModel, fit: Fit) -> dict[str, float | None]:
    """Variation over trials in the terms of the model."""
    random, beta = model is OneStageModel.BINOMIAL_NORMAL_RANDOM, model is OneStageModel.BETA_BINOMIAL
    # a beta-binomial fit of two parameters is the one without correlation
    correlation = float(expit(-fit.x[2])) if len(fit.x) > 2 else 0.0
    return {
        "tau2": None if beta else float(fit.x[-1]),
        "intercept": float(fit.x[0]) if random else None,
        "intercept_variance": float(fit.x[2]) if random else None,
        "correlation": correlation if beta else None,
    }


def _options(model: str, measure: str, interval: str, level: float) -> tuple[OneStageModel, Measure]:
    """Check the words given as options."""
    chosen = choose(OneStageModel, model, "model")
    allowed = [Measure.ODDS_RATIO.value]
    if chosen is OneStageModel.BETA_BINOMIAL:
        allowed += [Measure.RISK_RATIO.value, Measure.RISK_DIFFERENCE.value]
    if measure not in allowed:
        raise AnalysisError(f"The {chosen} model has no such measure.", found=measure, expected=allowed)
    if interval not in ("wald", "profile-likelihood"):
        raise AnalysisError("Unknown interval.", found=interval, expected="wald or profile-likelihood")
    if interval == "profile-likelihood" and measure != Measure.ODDS_RATIO:
        raise AnalysisError("The profile-likelihood interval is for the odds ratio only.", found=measure)
    check_level(level)
    return chosen, Measure(measure)
