"""Crossover trials: effects with the paired variance, since every participant is their own comparator.

Elbourne, Altman, Higgins, Curtin, Worthington and Vail 2002, Int J Epidemiol 31:140; Cochrane Handbook,
version 5.1 (2011), section 16.4.6. Whether both periods or only the first are used is a rule of the protocol.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math

from treering.effects.record import (
    NOT_STATED,
    Conversion,
    need,
    need_finite,
    need_people,
    need_positive,
    record,
)

ELBOURNE = "Elbourne, Altman, Higgins, Curtin, Worthington and Vail 2002, Int J Epidemiol 31:140"
BECKER = "Becker and Balagtas 1993, Biometrics 49:997; Elbourne et al. 2002, Int J Epidemiol 31:140"


def paired_mean_difference(
    intervention_mean: float,
    intervention_sd: float,
    comparator_mean: float,
    comparator_sd: float,
    total: float,
    *,
    correlation: float,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Mean difference of a crossover trial with variance :math:`(s_1^2 + s_2^2 - 2 r s_1 s_2)/n`.

    Parameters
    ----------
    intervention_mean, intervention_sd, comparator_mean, comparator_sd : float
        Under each treatment.
    total : float
        Participants with both measurements.
    correlation : float
        Correlation r of both measurements of a participant; where it comes from belongs in ``origin``.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``estimate``, ``variance`` and ``sd_of_differences``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_finite(trial, intervention_mean=intervention_mean, comparator_mean=comparator_mean)
    spread = sd_of_differences(intervention_sd, comparator_sd, correlation, trial)
    need_people(trial, total=total)
    inputs = _inputs(intervention_mean, intervention_sd, comparator_mean, comparator_sd, total, correlation)
    result = {
        "estimate": intervention_mean - comparator_mean,
        "variance": spread**2 / total,
        "sd_of_differences": spread,
    }
    return record("paired-mean-difference", ELBOURNE, inputs, result, origin, trial=trial)


def paired_standardized_mean_difference(
    intervention_mean: float,
    intervention_sd: float,
    comparator_mean: float,
    comparator_sd: float,
    total: float,
    *,
    correlation: float,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Standardized mean difference of a crossover trial, on the same scale as that of a parallel trial.

    Divided by :math:`\sqrt{(s_1^2 + s_2^2)/2}`, variance :math:`\{1/n + d^2/(2n)\}\,2(1 - r)` (Handbook 5.1,
    section 16.4.6.2). No small-sample factor, as in the source.

    Parameters
    ----------
    intervention_mean, intervention_sd, comparator_mean, comparator_sd, total : float
        As for :func:`paired_mean_difference`.
    correlation, trial, origin : float or str
        As for :func:`paired_mean_difference`.

    Returns
    -------
    Conversion
        With results ``estimate`` and ``variance``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_finite(trial, intervention_mean=intervention_mean, comparator_mean=comparator_mean)
    sd_of_differences(intervention_sd, comparator_sd, correlation, trial)
    need_people(trial, total=total)
    d = (intervention_mean - comparator_mean) / math.sqrt((intervention_sd**2 + comparator_sd**2) / 2)
    inputs = _inputs(intervention_mean, intervention_sd, comparator_mean, comparator_sd, total, correlation)
    result = {"estimate": d, "variance": (1 / total + d**2 / (2 * total)) * 2 * (1 - correlation)}
    return record("paired-standardized-mean-difference", ELBOURNE, inputs, result, origin, trial=trial)


def paired_log_odds_ratio(
    both: float,
    intervention_only: float,
    comparator_only: float,
    neither: float,
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Marginal log odds ratio of a crossover trial with the covariance of both responses.

    With p1 and p2 the share with the event under each treatment and p11 under both, the variance is
    :math:`1/(n p_1 q_1) + 1/(n p_2 q_2) - 2 (p_{11} - p_1 p_2)/(n p_1 q_1 p_2 q_2)` (Becker and Balagtas
    1993).

    Parameters
    ----------
    both, intervention_only, comparator_only, neither : float
        Participants by where they had the event.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``estimate`` and ``variance`` on the log scale.

    Raises
    ------
    AnalysisError
        If a count is below zero, or nobody or everybody had the event under a treatment.
    """
    cells: dict[str, float] = {
        "both": both,
        "intervention_only": intervention_only,
        "comparator_only": comparator_only,
        "neither": neither,
    }
    for field, value in cells.items():
        need_finite(trial, **{field: value})
        need(value >= 0, field, value, "is below zero", "0 or more", trial)
    n = both + intervention_only + comparator_only + neither
    need_positive(trial, total=n)
    p1, p2 = (both + intervention_only) / n, (both + comparator_only) / n
    for field, share in (("intervention events", p1), ("comparator events", p2)):
        need(0 < share < 1, field, share, "leaves the odds undefined", "some with and some without", trial)
    spread1, spread2 = p1 * (1 - p1), p2 * (1 - p2)
    variance = (1 / spread1 + 1 / spread2 - 2 * (both / n - p1 * p2) / (spread1 * spread2)) / n
    need(variance > 0, "intervention_only, comparator_only", 0, "nobody differs", "some who differ", trial)
    result = {"estimate": math.log(p1 / (1 - p1)) - math.log(p2 / (1 - p2)), "variance": variance}
    return record("paired-log-odds-ratio", BECKER, dict(cells), result, origin, trial=trial)


def sd_of_differences(
    intervention_sd: float, comparator_sd: float, correlation: float, trial: str | None = None
) -> float:
    """SD of the differences within participants, from both SDs and their correlation.

    Parameters
    ----------
    intervention_sd, comparator_sd : float
        Under each treatment.
    correlation : float
        Of both measurements of a participant, between -1 and 1.
    trial : str, optional
        For messages.

    Returns
    -------
    float
        SD, unit of the measurement.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_positive(trial, intervention_sd=intervention_sd, comparator_sd=comparator_sd)
    need_finite(trial, correlation=correlation)
    inside = -1 < correlation < 1
    need(inside, "correlation", correlation, "is not between -1 and 1", "a correlation", trial)
    return math.sqrt(
        intervention_sd**2 + comparator_sd**2 - 2 * correlation * intervention_sd * comparator_sd
    )


def _inputs(
    mean1: float, sd1: float, mean2: float, sd2: float, total: float, correlation: float
) -> dict[str, float | str]:
    return {
        "intervention_mean": mean1,
        "intervention_sd": sd1,
        "comparator_mean": mean2,
        "comparator_sd": sd2,
        "total": total,
        "correlation": correlation,
    }
