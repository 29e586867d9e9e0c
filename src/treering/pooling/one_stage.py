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
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from functools import partial

import numpy as np
import pandas as pd
from scipy.special import expit, gammaln
from scipy.stats import norm

from treering.errors import AnalysisError
from treering.pooling import beta_binomial, binomial, hypergeometric
from treering.pooling.binomial import Arms
from treering.pooling.checks import check_level, choose
from treering.pooling.likelihood_fit import Fit, Problem, best_point, fit_at, maximise, profile_interval
from treering.pooling.quadrature import Array, Derivatives, marginal
from treering.pooling.tables import two_arm_counts
from treering.terms import Measure


class OneStageModel(StrEnum):
    """One-stage model of binary counts."""

    HYPERGEOMETRIC_NORMAL = "hypergeometric-normal"
    BINOMIAL_NORMAL_FIXED = "binomial-normal-fixed-intercepts"
    BINOMIAL_NORMAL_RANDOM = "binomial-normal-random-intercepts"
    BETA_BINOMIAL = "beta-binomial"


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


def _crude(arms: Arms) -> float:
    """Crude log odds ratio of the summed tables with one half added (a start value only)."""
    a, c = arms.events_1.sum() + 0.5, arms.events_2.sum() + 0.5
    b, d = (arms.total_1 - arms.events_1).sum() + 0.5, (arms.total_2 - arms.events_2).sum() + 0.5
    return float(np.log(a * d / (b * c)))


def _normal_problem(model: OneStageModel, arms: Arms, nodes: int) -> Problem:
    """Likelihood in (mean, tau2) for the two models that have no random intercept."""
    k, crude = len(arms.events_1), _crude(arms)
    tables = hypergeometric.conditional_tables(arms.events_1, arms.total_1, arms.events_2, arms.total_2)
    warm = {"intercepts": binomial.starting_intercepts(arms)}

    def objective(x: Array, nodes: int = nodes) -> tuple[float, Array]:
        if model is OneStageModel.HYPERGEOMETRIC_NORMAL:
            result = marginal(tables.derivatives, x[:1], x[1:], k=k, nodes=nodes)
        else:
            result, warm["intercepts"] = binomial.profiled_marginal(
                arms, float(x[0]), float(x[1]), warm["intercepts"], nodes=nodes
            )
        gradient = np.concatenate([result.gradient_mean.sum(axis=0), result.gradient_variance.sum(axis=0)])
        return float(result.log.sum()), gradient

    starts = tuple(np.array([crude, tau2]) for tau2 in (0.05, 1.0))
    lower, upper = np.array([-30.0, 0.0]), np.array([30.0, 50.0])
    return Problem(objective, starts, lower, upper, (1,), coarse=partial(objective, nodes=min(7, nodes)))


def _random_problem(arms: Arms, nodes: int) -> Problem:
    """Likelihood in (mean intercept, mean effect, intercept variance, tau2)."""
    k, crude = len(arms.events_1), _crude(arms)

    def both(theta: Array) -> Derivatives:
        return binomial.intercept_and_effect(arms, theta)

    def objective(x: Array, nodes: int = nodes) -> tuple[float, Array]:
        result = marginal(both, x[:2], x[2:], k=k, nodes=nodes)
        gradient = np.concatenate([result.gradient_mean.sum(axis=0), result.gradient_variance.sum(axis=0)])
        return float(result.log.sum()), gradient

    events, total = (arms.events_1 + arms.events_2).sum(), (arms.total_1 + arms.total_2).sum()
    intercept = float(np.log((events + 0.5) / (total - events + 0.5)))
    starts = tuple(np.array([intercept, crude, 0.5, tau2]) for tau2 in (0.05, 1.0))
    lower, upper = np.array([-40.0, -30.0, 0.0, 0.0]), np.array([40.0, 30.0, 100.0, 50.0])
    return Problem(objective, starts, lower, upper, (2, 3), coarse=partial(objective, nodes=min(5, nodes)))


def _refuse_infinite(model: OneStageModel, arms: Arms) -> None:
    """Raise when the likelihood is largest at an infinite effect."""
    sums = {
        "no event in the intervention arm of any trial": arms.events_1.sum() == 0,
        "no event in the comparator arm of any trial": arms.events_2.sum() == 0,
        "events in everyone in all intervention arms": np.all(arms.events_1 == arms.total_1),
        "events in everyone in all comparator arms": np.all(arms.events_2 == arms.total_2),
    }
    if model in (OneStageModel.HYPERGEOMETRIC_NORMAL, OneStageModel.BINOMIAL_NORMAL_FIXED):
        least = (arms.events_1 == 0) | (arms.events_2 == arms.total_2)
        most = (arms.events_2 == 0) | (arms.events_1 == arms.total_1)
        sums["in every trial the events lie as far as they can on the same side"] = bool(
            np.all(least) or np.all(most)
        )
    reasons = [text for text, holds in sums.items() if holds]
    if reasons:
        raise AnalysisError(
            f"The odds ratio has no finite maximum-likelihood estimate: {reasons[0]}.",
            next_step="Report the counts; a risk difference can still be pooled.",
        )


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
        Quadrature nodes per dimension; 15 by default, 11 with two random effects.

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
    arms = two_arm_counts(table, whole=chosen is OneStageModel.HYPERGEOMETRIC_NORMAL)
    events, total = arms.events_1 + arms.events_2, arms.total_1 + arms.total_2
    within_trial = chosen in (OneStageModel.HYPERGEOMETRIC_NORMAL, OneStageModel.BINOMIAL_NORMAL_FIXED)
    informative = (events > 0) & (events < total) if within_trial else np.ones(len(events), dtype=bool)
    used = arms.subset(informative)
    if not informative.any():
        raise AnalysisError("No trial has both an event and a non-event: nothing to estimate.")
    _refuse_infinite(chosen, used)
    if chosen is OneStageModel.BETA_BINOMIAL:
        problem, fit, correlation = _fit_beta_binomial(used)
        nodes_used = None
    else:
        nodes_used = nodes or (11 if chosen is OneStageModel.BINOMIAL_NORMAL_RANDOM else 15)
        random = chosen is OneStageModel.BINOMIAL_NORMAL_RANDOM
        problem = _random_problem(used, nodes_used) if random else _normal_problem(chosen, used, nodes_used)
        fit, correlation = maximise(problem), None
    position = 0 if within_trial else 1
    estimate, error = float(fit.x[position]), float(np.sqrt(fit.covariance[position, position]))
    if chosen is OneStageModel.BETA_BINOMIAL:
        estimate, error = _measured(fit, wanted)
    half = float(norm.ppf(0.5 + level / 2)) * error
    low, high = estimate - half, estimate + half
    if interval == "profile-likelihood":
        low, high = profile_interval(problem, fit, position, level)
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
        tau2=None if chosen is OneStageModel.BETA_BINOMIAL else float(fit.x[-1]),
        intercept=float(fit.x[0]) if chosen is OneStageModel.BINOMIAL_NORMAL_RANDOM else None,
        intercept_variance=float(fit.x[2]) if chosen is OneStageModel.BINOMIAL_NORMAL_RANDOM else None,
        correlation=correlation,
        log_likelihood=fit.log_likelihood + constant,
        k=len(events),
        k_informative=int(informative.sum()),
        k_double_zero=int(np.sum(events == 0)),
        nodes=nodes_used,
    )


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


def _fit_beta_binomial(arms: Arms) -> tuple[Problem, Fit, float]:
    """Fit with a free correlation and with none; keep the simpler one when it is as likely."""
    plain = beta_binomial.problem(arms, correlated=False)
    plain_fit = maximise(plain)
    varying = beta_binomial.problem(arms, correlated=True)
    x, value = best_point(varying)
    if value <= plain_fit.log_likelihood + 1e-7:
        return plain, plain_fit, 0.0
    fit = fit_at(varying, x, value)
    return varying, fit, float(1 / (1 + np.exp(fit.x[2])))
