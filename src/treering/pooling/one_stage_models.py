"""Likelihoods of the one-stage models, ready to be maximised, and the cases without a finite maximum."""

from __future__ import annotations

from dataclasses import replace
from enum import StrEnum
from functools import partial

import numpy as np

from treering.errors import AnalysisError, NotConvergedError
from treering.pooling import beta_binomial, binomial, hypergeometric
from treering.pooling.binomial import Arms
from treering.pooling.likelihood_fit import Fit, Problem, best_point, fit_at, maximise
from treering.pooling.quadrature import Array, Derivatives, marginal


class OneStageModel(StrEnum):
    """One-stage model of binary counts."""

    HYPERGEOMETRIC_NORMAL = "hypergeometric-normal"
    BINOMIAL_NORMAL_FIXED = "binomial-normal-fixed-intercepts"
    BINOMIAL_NORMAL_RANDOM = "binomial-normal-random-intercepts"
    BETA_BINOMIAL = "beta-binomial"

    @property
    def within_trial(self) -> bool:
        """Whether only a trial with an event and a non-event can move the estimate."""
        return self in (OneStageModel.HYPERGEOMETRIC_NORMAL, OneStageModel.BINOMIAL_NORMAL_FIXED)


#: Nodes per dimension, from the usual to the most. The first is enough for 1e-6 in the log-likelihood of
#: trials with zero cells, see the tests, unless variances are wide; more are taken where two rungs disagree.
NODES = {
    OneStageModel.HYPERGEOMETRIC_NORMAL: (25, 61, 151),
    OneStageModel.BINOMIAL_NORMAL_FIXED: (15, 41, 101),
    OneStageModel.BINOMIAL_NORMAL_RANDOM: (11, 21, 41),
}
_AGREE, _TOO_FAR = 1e-4, 1e-2


def fit_model(model: OneStageModel, arms: Arms, nodes: int | None = None) -> tuple[Problem, Fit, int | None]:
    """Maximise the likelihood of one model.

    Parameters
    ----------
    model : OneStageModel
        The model.
    arms : Arms
        The trials that it uses.
    nodes : int, optional
        Quadrature nodes per dimension; as many as the data need when left out.

    Returns
    -------
    Problem
        The likelihood; of the beta-binomial without its correlation when that is 0.
    Fit
        Its maximum.
    int or None
        Nodes used; None for the beta-binomial, which has none.

    Raises
    ------
    NotConvergedError
        When there is no proper maximum, or the most nodes are still too few.
    """
    if model is OneStageModel.BETA_BINOMIAL:
        return *_fit_beta_binomial(arms), None
    if nodes:
        problem = _started(model, arms, nodes)
        return problem, maximise(problem), nodes
    return _fit_with_enough_nodes(model, arms)


def _fit_with_enough_nodes(model: OneStageModel, arms: Arms) -> tuple[Problem, Fit, int]:
    """Go up the rungs until the next one gives the same log-likelihood at the maximum."""
    most = NODES[model][-1]
    problem = _started(model, arms, NODES[model][0])
    for nodes, finer in zip(NODES[model], (*NODES[model][1:], 2 * most + 1), strict=True):
        x, value = best_point(problem)
        following = _problem(model, arms, finer)
        gap = abs(following.objective(x)[0] - value)
        if gap < _AGREE or (nodes == most and gap < _TOO_FAR):
            return problem, fit_at(problem, x, value), nodes
        problem = replace(following, starts=(x,), coarse=None)
    raise NotConvergedError(
        "The integral over trials is not settled: the trials differ too widely for this model.",
        found=f"log-likelihoods {gap:.2g} apart with {most} and {2 * most + 1} nodes",
    )


def _problem(model: OneStageModel, arms: Arms, nodes: int) -> Problem:
    """Likelihood of a model with normal effects."""
    if model is OneStageModel.BINOMIAL_NORMAL_RANDOM:
        return _random_problem(arms, nodes)
    return _normal_problem(model, arms, nodes)


def _started(model: OneStageModel, arms: Arms, nodes: int) -> Problem:
    """Likelihood of a model with the best start values at hand."""
    problem = _problem(model, arms, nodes)
    if model is OneStageModel.BINOMIAL_NORMAL_FIXED and arms.whole:
        return _started_near(problem, arms)
    return problem


def _started_near(problem: Problem, arms: Arms) -> Problem:
    """Start the dear profile likelihood at the maximum of the conditional one, which lies close by."""
    near, _ = best_point(_normal_problem(OneStageModel.HYPERGEOMETRIC_NORMAL, arms, 7))
    return replace(problem, starts=(np.array([near[0], max(near[1], 0.01)]),))


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


def _fit_beta_binomial(arms: Arms) -> tuple[Problem, Fit]:
    """Fit with a free correlation and with none; keep the simpler one when it is as likely."""
    plain = beta_binomial.problem(arms, correlated=False)
    plain_fit = maximise(plain)
    varying = beta_binomial.problem(arms, correlated=True)
    x, value = best_point(varying)
    if value <= plain_fit.log_likelihood + 1e-7:
        return plain, plain_fit
    return varying, fit_at(varying, x, value)


def refuse_infinite(model: OneStageModel, arms: Arms) -> None:
    """Raise when the likelihood is largest at an infinite effect.

    Parameters
    ----------
    model : OneStageModel
        The model.
    arms : Arms
        The trials that it uses.

    Raises
    ------
    AnalysisError
        With the reason.
    """
    sums = {
        "no event in the intervention arm of any trial": arms.events_1.sum() == 0,
        "no event in the comparator arm of any trial": arms.events_2.sum() == 0,
        "events in everyone in all intervention arms": np.all(arms.events_1 == arms.total_1),
        "events in everyone in all comparator arms": np.all(arms.events_2 == arms.total_2),
    }
    if model.within_trial:
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
