"""Many reviews at once, drawn and pooled at every look.

The trials of a review run down (axis 0) and the reviews across (axis 1), as in the batched kernel of
`treering.pooling`, which does the estimation of tau2: the simulated test is the test of the ledger.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import expit, logit

from treering.monitoring.checks import FloatArray
from treering.monitoring.design import BinaryTrials, SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.pooling.batch import Batch
from treering.pooling.moments import sums
from treering.pooling.tau2 import estimate_tau2, read_at_zero
from treering.terms import IntervalMethod, Measure, Tau2


@dataclass(frozen=True)
class Pooled:
    """Pooled results of a chunk of reviews at each look, arrays of shape (looks, reviews).

    Parameters
    ----------
    mean, wald, hartung : numpy.ndarray
        Random-effects estimate with its Wald and (modified) Knapp-Hartung standard errors; infinite
        where there is no such test.
    common_mean, common_error : numpy.ndarray
        Common-effect estimate with its standard error.
    k : numpy.ndarray
        Trials that carry weight; one column when it is the same in all reviews.
    """

    mean: FloatArray
    wald: FloatArray
    hartung: FloatArray
    common_mean: FloatArray
    common_error: FloatArray
    k: FloatArray


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
    if design.counts is not None:
        y, v = draw_counts(design.counts, tau2=tau2, effect=effect, reviews=reviews, rng=rng)
        shift = 0.0
    else:
        variance = 1.0 / np.array(design.information)[:, None]
        y = np.sqrt(variance + tau2) * rng.standard_normal((variance.size, reviews))
        v = np.repeat(variance, reviews, axis=1)
        shift = effect  # estimators do not depend on where the effects lie: add the mean after pooling
    rows = [_pool_look(plan, y[:k], v[:k]) for k in design.looks]
    mean, wald, hartung, common, error, k = (np.array(part) for part in zip(*rows, strict=True))
    same = k[:, :1] if np.all(k == k[:, :1]) else k
    return Pooled(mean + shift, wald, hartung, common + shift, error, same)


def draw_counts(
    counts: BinaryTrials, *, tau2: float, effect: float, reviews: int, rng: np.random.Generator
) -> tuple[FloatArray, FloatArray]:
    """Draw events of both arms and return log ratios with their variances.

    Parameters
    ----------
    counts : BinaryTrials
        Arm sizes, comparator risk and measure.
    tau2, effect : float
        True between-trial variance and mean of the log ratio.
    reviews : int
        Number of reviews.
    rng : numpy.random.Generator
        Source of the draws.

    Returns
    -------
    tuple of numpy.ndarray, shape (trials, reviews)
        Log ratio and large-sample variance; 0 and infinity for a trial without an estimate.
    """
    n1, n2 = (
        np.array(arm, dtype=float)[:, None] for arm in (counts.intervention_total, counts.comparator_total)
    )
    truth = effect + math.sqrt(tau2) * rng.standard_normal((n1.size, reviews))
    risk = counts.comparator_risk
    if counts.measure == Measure.ODDS_RATIO:
        other = expit(truth + logit(risk))
    else:
        other = np.minimum(risk * np.exp(truth), 1.0)
    a = rng.binomial(n1.astype(int), other).astype(float)
    c = rng.binomial(n2.astype(int), risk, size=a.shape).astype(float)
    with np.errstate(divide="ignore", invalid="ignore"):
        if counts.measure == Measure.ODDS_RATIO:
            y = np.log(a) + np.log(n2 - c) - np.log(c) - np.log(n1 - a)
            v = 1.0 / a + 1.0 / (n1 - a) + 1.0 / c + 1.0 / (n2 - c)
        else:
            y = np.log(a) - np.log(n1) - np.log(c) + np.log(n2)
            v = 1.0 / a - 1.0 / n1 + 1.0 / c - 1.0 / n2
    usable = np.isfinite(y) & np.isfinite(v) & (v > 0.0)
    return np.where(usable, y, 0.0), np.where(usable, v, np.inf)


def _pool_look(plan: MonitoringPlan, y: FloatArray, v: FloatArray) -> tuple[FloatArray, ...]:
    """Pool one look: random-effects mean and its two standard errors, common-effect mean and error, k."""
    k = np.isfinite(v).sum(axis=0).astype(float)
    weight = 1.0 / v
    total = weight.sum(axis=0)
    alone = (weight * y).sum(axis=0) / np.maximum(total, 1e-300)
    with np.errstate(divide="ignore"):
        lone_error = 1.0 / np.sqrt(total)
    mean, wald, hartung = alone.copy(), lone_error.copy(), np.full(k.size, np.inf)
    several = np.flatnonzero(k > 1.0)
    if several.size:
        whole = several.size == k.size
        batch = Batch(y, v, k) if whole else Batch(y, v, k).columns(several)
        mean[several], wald[several], hartung[several] = _pool_random(plan, batch)
    return mean, wald, hartung, alone, lone_error, k


def _pool_random(plan: MonitoringPlan, batch: Batch) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return random-effects mean with its Wald and Knapp-Hartung standard errors."""
    method = Tau2(plan.tau2)
    chosen = sums(batch, estimate_tau2(batch, read_at_zero(batch, method), method))
    error = 1.0 / np.sqrt(chosen.total)
    factor = chosen.q / (batch.k - 1.0)
    if plan.interval != IntervalMethod.KNAPP_HARTUNG:
        factor = np.maximum(factor, 1.0)
    return chosen.mean, error, error * np.sqrt(factor)
