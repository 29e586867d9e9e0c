"""Many reviews at once: pooled at every look, and judged by several rules.

The trials of a review run down (axis 0) and the reviews across (axis 1), as in the batched kernel of
`treering.pooling`, which does the estimation of tau2: the simulated test is the test of the ledger.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri, stdtrit

from treering.monitoring.checks import FloatArray
from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.redrawn import SAME, Used, redrawn_value
from treering.pooling.batch import Batch
from treering.pooling.moments import fit
from treering.pooling.tau2 import estimate_tau2
from treering.terms import IntervalMethod, PoolingModel, Tau2

PLAN = "the plan"
ORDINARY = "ordinary tests at every look"
ORDINARY_PLANNED = "ordinary tests at every look, planned test"
OTHER_TEST = "the plan's spending, other test"
MIXTURE = "anytime-valid mixture interval"


@dataclass(frozen=True)
class Pooled:
    """Pooled results of a chunk of reviews at each look, arrays of shape (looks, reviews).

    Parameters
    ----------
    mean, wald, hartung : numpy.ndarray
        Random-effects estimate with its Wald and (modified) Knapp-Hartung standard errors.
    common_mean, common_error : numpy.ndarray
        Common-effect estimate with its standard error; one column, for all reviews, of the latter.
    """

    mean: FloatArray
    wald: FloatArray
    hartung: FloatArray
    common_mean: FloatArray
    common_error: FloatArray


@dataclass(frozen=True)
class Rule:
    """A rule as critical values on the scale of its own statistic.

    Parameters
    ----------
    name : str
        The rule in words.
    test : str
        "wald", "hartung", "common" or "mixture": which statistic is compared.
    critical : numpy.ndarray, shape (looks,)
        Beyond it the boundary is crossed; infinite where nothing can cross.
    support : numpy.ndarray, shape (looks,)
        Beyond it an earlier crossing is still supported.
    """

    name: str
    test: str
    critical: FloatArray
    support: FloatArray


def pool_chunk(
    plan: MonitoringPlan,
    design: SimulationDesign,
    *,
    tau2: float,
    effect: float,
    reviews: int,
    rng: np.random.Generator,
) -> Pooled:
    """Draw the trials of many reviews and pool them at every look.

    Parameters
    ----------
    plan : MonitoringPlan
        Which estimator of tau2, and whether the Knapp-Hartung variance is bounded from below.
    design : SimulationDesign
        Trials and looks.
    tau2, effect : float
        True between-trial variance and mean effect on the analysis scale.
    reviews : int
        Number of reviews.
    rng : numpy.random.Generator
        Source of the draws: effects normal with variance tau2 + 1/information.

    Returns
    -------
    Pooled
    """
    v = 1.0 / np.array(design.information)
    y = np.sqrt(v + tau2)[:, None] * rng.standard_normal((v.size, reviews))
    # Estimators do not depend on where the effects lie, so the true mean is added after pooling.
    rows = [_pool_look(plan, y[:k], v[:k]) for k in design.looks]
    mean, wald, hartung, common = (np.array(part) for part in zip(*rows, strict=True))
    return Pooled(mean + effect, wald, hartung, common + effect, 1.0 / np.sqrt(design.accrued)[:, None])


def _pool_look(plan: MonitoringPlan, y: FloatArray, v: FloatArray) -> tuple[FloatArray, ...]:
    """Pool the trials of one look: random-effects mean, its two standard errors, common-effect mean."""
    k, reviews = y.shape
    batch = Batch(y, np.repeat(v[:, None], reviews, axis=1), np.full(reviews, float(k)))
    common = fit(batch, np.zeros(reviews))
    if k == 1:
        error = np.sqrt(batch.v[0])
        return common.mean, error, np.full(reviews, np.inf), common.mean
    chosen = fit(batch, estimate_tau2(batch, common, Tau2(plan.tau2)))
    error = 1.0 / np.sqrt(chosen.total)
    factor = chosen.q / (k - 1.0)
    if plan.interval != IntervalMethod.KNAPP_HARTUNG:
        factor = np.maximum(factor, 1.0)
    return chosen.mean, error, error * np.sqrt(factor), common.mean


def planned_kind(plan: MonitoringPlan) -> str:
    """Return which statistic the plan tests: "common", "wald" or "hartung"."""
    if plan.model == PoolingModel.COMMON:
        return "common"
    return "wald" if plan.interval == IntervalMethod.WALD else "hartung"


def rules_of(plan: MonitoringPlan, design: SimulationDesign) -> tuple[Rule, ...]:
    """Return the rules to compare: ordinary tests, the plan, and the alternatives.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    design : SimulationDesign
        Trials and looks; their information is known beforehand, so each rule has fixed critical values.

    Returns
    -------
    tuple of Rule
    """
    planned = planned_kind(plan)
    other = "wald" if planned == "hartung" else "hartung"
    ordinary = [ordinary_rule(plan, design, ORDINARY, "wald")]
    if planned != "wald":
        ordinary.append(ordinary_rule(plan, design, ORDINARY_PLANNED, planned))
    spending = [spending_rule(plan, design, PLAN, planned), spending_rule(plan, design, OTHER_TEST, other)]
    none = np.zeros(len(design.looks))
    return (*ordinary, *spending, Rule(MIXTURE, "mixture", none, none))


def ordinary_rule(plan: MonitoringPlan, design: SimulationDesign, name: str, test: str) -> Rule:
    """Test at the plan's full alpha at every look, as if each were the only one."""
    z = [-float(ndtri(plan.alpha / plan.sides))] * len(design.looks)
    critical = _on_own_scale(test, z, design.looks)
    return Rule(name, test, critical, critical)


def spending_rule(plan: MonitoringPlan, design: SimulationDesign, name: str, test: str) -> Rule:
    """Spend alpha as planned; looks that cannot be tested spend nothing (see `planned_test`)."""
    required = plan.required_information
    used: list[Used] = []
    critical, support = [], []
    finished = False
    for trials, information in zip(design.looks, design.accrued, strict=True):
        if test == "hartung" and trials < 2:
            critical.append(math.inf)
            support.append(math.inf)
            continue
        value = redrawn_value(plan, used, float(information), required, plan.alpha)
        support.append(math.inf if value is None else value)
        critical.append(math.inf if finished else support[-1])
        if not finished:
            used.append((float(information), value))
        finished = finished or information >= required * (1.0 - SAME)
    return Rule(
        name,
        test,
        _on_own_scale(test, critical, design.looks),
        _on_own_scale(test, support, design.looks),
    )


def _on_own_scale(test: str, z: Sequence[float], looks: Sequence[int]) -> FloatArray:
    """Carry critical Z to the t distribution with the same tail for a Knapp-Hartung statistic."""
    if test != "hartung":
        return np.array(z, dtype=float)
    df = np.maximum(np.array(looks) - 1.0, 1.0)
    values = np.array(z, dtype=float)
    quantiles: FloatArray = np.where(np.isinf(values), np.inf, -stdtrit(df, ndtr(-values)))
    return np.where(np.array(looks) < 2, np.inf, quantiles)


def tally(
    plan: MonitoringPlan, design: SimulationDesign, rule: Rule, pooled: Pooled, effect: float
) -> FloatArray:
    """Judge a chunk of reviews by one rule and add up what happened.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    design : SimulationDesign
        Trials and looks.
    rule : Rule
        The rule.
    pooled : Pooled
        The chunk.
    effect : float
        True mean effect.

    Returns
    -------
    numpy.ndarray, shape (9,)
        Reviews; crossings; crossings to the side of the true effect (at no effect: to the benefit side);
        information at the first crossing, its sum and sum of squares; crossings lost at a later look; and
        how far the estimate at the first crossing is beyond the true effect, sum and sum of squares;
        crossings of the harm boundary.
    """
    estimate, statistic, threshold, support = _statistic(plan, rule, pooled)
    oriented = statistic * plan.tested_direction if plan.sides == 1 else np.abs(statistic)
    crossed = oriented >= threshold
    alarm = crossed.any(axis=0)
    chosen = np.flatnonzero(alarm)
    first = crossed[:, chosen].argmax(axis=0)
    side = np.sign(statistic[first, chosen])
    lost = _lost(statistic[:, chosen] * side, support, chosen, first)
    information = design.accrued[first]
    beyond = side * (estimate[first, chosen] - effect)
    toward = np.sign(effect) if effect else plan.benefit_direction
    return np.array(
        [
            alarm.size,
            chosen.size,
            np.count_nonzero(side == toward),
            information.sum(),
            (information**2).sum(),
            np.count_nonzero(lost),
            beyond.sum(),
            (beyond**2).sum(),
            np.count_nonzero(side != plan.benefit_direction),
        ]
    )


def _statistic(
    plan: MonitoringPlan, rule: Rule, pooled: Pooled
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Return estimate, statistic and what it is compared with, for crossing and for support."""
    kind = planned_kind(plan) if rule.test == "mixture" else rule.test
    estimate = pooled.common_mean if kind == "common" else pooled.mean
    error = {"common": pooled.common_error, "wald": pooled.wald, "hartung": pooled.hartung}[kind]
    statistic = estimate / error
    if rule.test != "mixture":
        return estimate, statistic, rule.critical[:, None], rule.support[:, None]
    ratio = np.maximum((plan.mixture_prior_sd / error) ** 2, 1e-300)
    radius = np.sqrt((1.0 + 1.0 / ratio) * (np.log1p(ratio) - 2.0 * math.log(plan.alpha)))
    return estimate, statistic, radius, radius


def _lost(
    oriented: FloatArray, support: FloatArray, chosen: NDArray[np.intp], first: NDArray[np.intp]
) -> NDArray[np.bool_]:
    """Return which crossings are not supported at some later look."""
    needed = support[:, chosen] if support.shape[1] > 1 else support
    later = np.arange(len(oriented))[:, None] > first
    unsupported: NDArray[np.bool_] = np.any(later & (oriented < needed), axis=0)
    return unsupported
