"""Bayesian normal-normal meta-analysis by quadrature over tau.

Trial estimates are normal around their own effects, those are normal around the mean effect with standard
deviation tau. Given tau the posterior of the mean effect is normal in closed form, so only tau is integrated
numerically: the posterior of the effect is a mixture of normals over tau (Spiegelhalter, Abrams and Myles
2004, ch. 8; Higgins, Thompson and Spiegelhalter 2009, JRSS A 172:137). Nothing is sampled; the same input
gives the same digits.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike
from treering.pooling.checks import check_effects, check_level, choose
from treering.pooling.posterior import Mixture, integrate_tau, mixtures, tau_quantiles
from treering.pooling.priors import EMPIRICAL_PRIORS, TauPrior, tau_prior
from treering.terms import Better


@dataclass(frozen=True, slots=True)
class BayesianEffect:
    """Posterior of the mean effect, of tau and of the effect in the next trial.

    All on the analysis scale (log for ratios). Intervals are equal-tailed at ``level``.

    Attributes
    ----------
    estimate, standard_deviation, ci_low, ci_high : float
        Posterior median, standard deviation and credible interval of the mean effect. The standard
        deviation is infinite when the posterior has none (few trials with a heavy-tailed prior).
    tau_median, tau_low, tau_high : float
        Posterior of tau.
    next_median, next_low, next_high : float
        True effect in the next trial.
    p_below_zero, p_above_zero : float
        Probability that the mean effect lies below or above no effect.
    p_benefit : float
        Probability that the mean effect lies on the good side of no effect.
    p_beyond_mid, p_harm_beyond_mid : float or None
        Probability of a mean effect beyond the minimally important difference, on the good and on the bad
        side; None when no difference was given.
    p_next_benefit : float
        As ``p_benefit``, for the next trial's effect.
    p_next_beyond_mid : float or None
        As ``p_beyond_mid``, for the next trial's effect.
    better : str
        Which direction is good: "lower" or "higher".
    mid : float or None
        Minimally important difference, a positive distance.
    prior, prior_source : str
        Prior of tau in words and where it comes from.
    effect_prior : str
        Prior of the mean effect in words.
    k : int
        Number of trials.
    level : float
        Probability content of the intervals.
    points : int
        Quadrature points used.
    """

    estimate: float
    standard_deviation: float
    ci_low: float
    ci_high: float
    tau_median: float
    tau_low: float
    tau_high: float
    next_median: float
    next_low: float
    next_high: float
    p_below_zero: float
    p_above_zero: float
    p_benefit: float
    p_beyond_mid: float | None
    p_harm_beyond_mid: float | None
    p_next_benefit: float
    p_next_beyond_mid: float | None
    better: str
    mid: float | None
    prior: str
    prior_source: str
    effect_prior: str
    k: int
    level: float
    points: int


def _beyond(mixture: Mixture, limit: float, better: Better) -> float:
    """Probability of a value beyond ``limit`` (a signed distance towards the good side)."""
    return mixture.below(-limit) if better is Better.LOWER else 1 - mixture.below(limit)


def pool_bayesian(
    estimates: ArrayLike,
    variances: ArrayLike,
    prior: TauPrior | str,
    *,
    better: str | Better = Better.LOWER,
    mid: float | None = None,
    effect_prior: tuple[float, float] | None = None,
    level: float = 0.95,
) -> BayesianEffect:
    """Pool trials in the Bayesian normal-normal model.

    Parameters
    ----------
    estimates, variances : array-like, shape (k,)
        Trial effects on the analysis scale and their variances.
    prior : TauPrior or str
        Prior of tau, or the name of one in ``EMPIRICAL_PRIORS``.
    better : str
        "lower" or "higher": the direction of the effect that is good for patients.
    mid : float, optional
        Minimally important difference, a positive distance on the analysis scale.
    effect_prior : tuple of float, optional
        Mean and standard deviation of a normal prior of the mean effect; flat when left out.
    level : float
        Probability content of the intervals.

    Returns
    -------
    BayesianEffect

    Raises
    ------
    AnalysisError
        Bad numbers (the trial is named), unknown prior, or an ``mid`` that is not positive.
    """
    y, v = check_effects(estimates, variances)
    side, level = choose(Better, better, "better"), check_level(level)
    _check_options(mid, effect_prior)
    source = (
        EMPIRICAL_PRIORS[prior].source if isinstance(prior, str) and prior in EMPIRICAL_PRIORS else "chosen"
    )
    chosen = tau_prior(prior) if isinstance(prior, str) else prior
    grid = integrate_tau(y, v, chosen, effect_prior)
    effect, following = mixtures(grid)
    tails = (0.5 - level / 2, 0.5, 0.5 + level / 2)
    low, median, high = (effect.quantile(p) for p in tails)
    next_low, next_median, next_high = (following.quantile(p) for p in tails)
    tau_low, tau_median, tau_high = tau_quantiles(grid, tails)
    below = effect.below(0.0)
    return BayesianEffect(
        estimate=median,
        standard_deviation=_standard_deviation(effect, chosen, len(y), effect_prior),
        ci_low=low,
        ci_high=high,
        tau_median=tau_median,
        tau_low=tau_low,
        tau_high=tau_high,
        next_median=next_median,
        next_low=next_low,
        next_high=next_high,
        p_below_zero=below,
        p_above_zero=1 - below,
        p_benefit=_beyond(effect, 0.0, side),
        p_beyond_mid=None if mid is None else _beyond(effect, mid, side),
        p_harm_beyond_mid=None if mid is None else 1 - _beyond(effect, -mid, side),
        p_next_benefit=_beyond(following, 0.0, side),
        p_next_beyond_mid=None if mid is None else _beyond(following, mid, side),
        better=side.value,
        mid=mid,
        prior=chosen.describe(),
        prior_source=source,
        effect_prior="flat"
        if effect_prior is None
        else f"normal, mean {effect_prior[0]:g}, SD {effect_prior[1]:g}",
        k=len(y),
        level=level,
        points=len(grid.log_tau),
    )


def _check_options(mid: float | None, effect_prior: tuple[float, float] | None) -> None:
    """Refuse a difference or a prior that makes no sense."""
    if mid is not None and not (math.isfinite(mid) and mid > 0):
        raise AnalysisError(
            "The minimally important difference must be a positive distance on the analysis scale.", found=mid
        )
    if effect_prior is not None and not (math.isfinite(effect_prior[0]) and 0 < effect_prior[1] < math.inf):
        raise AnalysisError("The effect's prior needs a finite mean and a positive SD.", found=effect_prior)


def _standard_deviation(
    effect: Mixture, prior: TauPrior, k: int, effect_prior: tuple[float, float] | None
) -> float:
    """Posterior standard deviation of the mean effect; infinite when its second moment diverges.

    The posterior of tau falls like tau^-(a + k - 1) when the prior falls like tau^-a and the effect's prior
    is flat; the variance given tau grows like tau^2.
    """
    if effect_prior is None and prior.tail_power + k - 1 <= 3:
        return math.inf
    mean = float(effect.weights @ effect.means)
    return math.sqrt(float(effect.weights @ (effect.sds**2 + (effect.means - mean) ** 2)))
