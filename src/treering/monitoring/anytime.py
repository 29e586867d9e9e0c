"""Statements that hold at every look, however the looks fall: normal mixtures, e-values, penalised Z.

They need no required information and no plan of looks, so they carry on after fraction 1.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray, check_alpha, check_effect, check_positive


def mixture_interval(
    estimate: float, standard_error: float, *, prior_sd: float, alpha: float = 0.05
) -> tuple[float, float]:
    """Return the anytime-valid interval from a normal mixture.

    Parameters
    ----------
    estimate, standard_error : float
        Pooled estimate and its standard error on the analysis scale.
    prior_sd : float
        Standard deviation of the normal mixture of true effects around the null value.
    alpha : float
        Chance, over all looks ever made, that the interval misses the true effect; in (0, 0.5).

    Returns
    -------
    (low, high) : tuple of float
        Estimate -+ se sqrt((1 + se^2/sd^2) (log(1 + sd^2/se^2) + 2 log(1/alpha))).

    Raises
    ------
    AnalysisError
        If an input cannot be used.

    References
    ----------
    Robbins 1970, Annals of Mathematical Statistics 41:1397. Howard, Ramdas, McAuliffe and Sekhon 2021,
    Annals of Statistics 49:1055.
    """
    check_alpha(alpha)
    check_positive(standard_error, "standard error")
    check_positive(prior_sd, "standard deviation of the mixture")
    ratio = (prior_sd / standard_error) ** 2
    squared = (1.0 + 1.0 / ratio) * (math.log1p(ratio) - 2.0 * math.log(alpha))
    radius = standard_error * math.sqrt(squared)
    return estimate - radius, estimate + radius


def log_e_value(estimate: float, standard_error: float, *, prior_sd: float) -> float:
    """Return the natural logarithm of the e-value against no effect, from a normal mixture.

    Parameters
    ----------
    estimate, standard_error : float
        Estimate and its standard error on the analysis scale.
    prior_sd : float
        Standard deviation of the normal mixture of true effects around no effect.

    Returns
    -------
    float
        -log(1 + sd^2/se^2)/2 + z^2 sd^2 / (2 (sd^2 + se^2)); above log(1/alpha) exactly when the
        interval of `mixture_interval` leaves out 0.

    Raises
    ------
    AnalysisError
        If an input cannot be used.

    References
    ----------
    Robbins 1970, Annals of Mathematical Statistics 41:1397.
    """
    check_positive(standard_error, "standard error")
    check_positive(prior_sd, "standard deviation of the mixture")
    ratio = (prior_sd / standard_error) ** 2
    z = estimate / standard_error
    return -0.5 * math.log1p(ratio) + 0.5 * z * z * ratio / (1.0 + ratio)


def log_e_product(
    estimates: ArrayLike,
    standard_errors: ArrayLike,
    *,
    prior_sd: float | None = None,
    effect: float | None = None,
) -> FloatArray:
    """Return the running logarithm of the product of the trials' e-values against no effect.

    Each trial's e-value has mean at most 1 when there is no effect in that trial, so the product over
    trials stays valid whenever one stops and whatever made the next trial happen. Unlike
    `log_e_value` on the pooled estimate it asks for no common effect.

    Parameters
    ----------
    estimates, standard_errors : array_like, shape (k,)
        One trial each, in the order they entered, on the analysis scale.
    prior_sd : float, optional
        Mixture: standard deviation of true effects around no effect. Give this or `effect`.
    effect : float, optional
        Likelihood ratio of this effect against none (one-sided), on the analysis scale.

    Returns
    -------
    ndarray, shape (k,)
        Logarithm of the product up to and with each trial.

    Raises
    ------
    AnalysisError
        If the trials cannot be used or not exactly one of `prior_sd` and `effect` is given.

    References
    ----------
    ter Schure and Gruenwald 2022, F1000Research 11:549.
    """
    y = np.atleast_1d(np.asarray(estimates, dtype=np.float64))
    se = np.atleast_1d(np.asarray(standard_errors, dtype=np.float64))
    if y.shape != se.shape or y.ndim != 1 or not np.all(np.isfinite(y)) or not np.all(np.isfinite(se)):
        raise AnalysisError(
            "Estimates and standard errors do not belong to the same trials.",
            found=f"{y.size} estimates, {se.size} standard errors",
            expected="one finite estimate and standard error for each trial",
            next_step="Leave out trials without a usable estimate; they stay listed elsewhere.",
        )
    check_positive(float(se.min(initial=math.inf)) if se.size else math.nan, "smallest standard error")
    if effect is not None and prior_sd is None:
        check_effect(effect)
        logs = (effect * y - 0.5 * effect**2) / se**2
    elif prior_sd is not None and effect is None:
        check_positive(prior_sd, "standard deviation of the mixture")
        ratio = (prior_sd / se) ** 2
        logs = -0.5 * np.log1p(ratio) + 0.5 * (y / se) ** 2 * ratio / (1.0 + ratio)
    else:
        raise AnalysisError(
            "The alternative of the e-values is not stated once.",
            found=f"prior_sd {prior_sd}, effect {effect}",
            expected="either prior_sd or effect",
            next_step="State the mixture or the effect to detect in the protocol.",
        )
    running: FloatArray = np.cumsum(logs)
    return running


def iterated_logarithm_z(z: float, information: float, *, penalty: float = 2.0) -> float:
    """Return Z penalised by the law of the iterated logarithm, to be read against the ordinary bound.

    Parameters
    ----------
    z : float
        Z of the pooled estimate.
    information : float
        1/variance of the pooled estimate, above e.
    penalty : float
        The factor lambda; 2 is the factor of the law itself, the authors give smaller ones for
        particular measures and errors.

    Returns
    -------
    float
        z / sqrt(lambda log log information), never larger than z in absolute value.

    Raises
    ------
    AnalysisError
        If the information is e (2.718) or less or the penalty is not above 0.

    Notes
    -----
    The penalty depends on the unit of the information; on log ratios the information is about a quarter
    of the events. That the factor is kept from falling below 1, just above e, is ours.

    References
    ----------
    Lan, Hu and Cappelleri 2003, Statistica Sinica 13:1135.
    """
    check_positive(penalty, "penalty of the iterated logarithm")
    if not information > math.e or math.isinf(information):
        raise AnalysisError(
            "The iterated logarithm has no value at so little information.",
            found=information,
            expected="information (1/variance on the analysis scale) above 2.718",
            next_step="Show this second opinion from a later look on.",
        )
    return z / math.sqrt(max(1.0, penalty * math.log(math.log(information))))
