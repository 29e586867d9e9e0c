"""Rules by which simulated reviews are judged: ordinary tests, the plan, and the alternatives."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri, stdtrit

from treering.monitoring.checks import FloatArray
from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.redrawn import SAME, Used, redrawn_value
from treering.monitoring.simulate_kernel import Pooled
from treering.terms import IntervalMethod, PoolingModel

PLAN = "the plan"
ORDINARY = "ordinary tests at every look"
ORDINARY_PLANNED = "ordinary tests at every look, planned test"
OTHER_TEST = "the plan's spending, other test"
MIXTURE = "anytime-valid mixture interval"


@dataclass(frozen=True)
class Rule:
    """A rule as critical Z at each look.

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
    critical = np.array(z)
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
    return Rule(name, test, np.array(critical), np.array(support))


def on_own_scale(test: str, z: FloatArray, k: FloatArray) -> FloatArray:
    """Carry critical Z to the scale of a statistic.

    Parameters
    ----------
    test : str
        "hartung" for the t distribution on k - 1 degrees of freedom with the same tail; else Z itself.
    z : numpy.ndarray, shape (looks,)
        Critical Z.
    k : numpy.ndarray, shape (looks, 1) or (looks, reviews)
        Trials.

    Returns
    -------
    numpy.ndarray
        Of the shape of `k`.
    """
    column = np.broadcast_to(z[:, None], k.shape)
    if test != "hartung":
        return column
    quantiles: FloatArray = -stdtrit(np.maximum(k - 1.0, 1.0), ndtr(-column))
    return np.where(np.isinf(column) | (k < 2.0), np.inf, quantiles)


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
        critical = on_own_scale(rule.test, rule.critical, pooled.k)
        if rule.support is rule.critical:
            return estimate, statistic, critical, critical
        return estimate, statistic, critical, on_own_scale(rule.test, rule.support, pooled.k)
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
