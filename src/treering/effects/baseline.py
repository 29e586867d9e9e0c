"""Change from baseline: its SD from the SDs of both time points and their correlation.

Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), section 16.1.3.2.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math

from treering.effects.record import NOT_STATED, Conversion, need, need_finite, need_positive, record

HANDBOOK = "Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), section 16.1.3.2"


def change_from_baseline(
    baseline_mean: float,
    baseline_sd: float,
    final_mean: float,
    final_sd: float,
    *,
    correlation: float,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Mean and SD of the change of one arm: :math:`\sqrt{s_b^2 + s_f^2 - 2 r s_b s_f}`.

    Parameters
    ----------
    baseline_mean, baseline_sd, final_mean, final_sd : float
        Both time points of one arm.
    correlation : float
        Correlation r of both time points, between -1 and 1; where it comes from belongs in ``origin``.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``mean`` (final minus baseline) and ``sd``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_finite(trial, baseline_mean=baseline_mean, final_mean=final_mean)
    need_positive(trial, baseline_sd=baseline_sd, final_sd=final_sd)
    need_finite(trial, correlation=correlation)
    inside = -1 < correlation < 1
    need(inside, "correlation", correlation, "is not between -1 and 1", "a correlation", trial)
    spread = baseline_sd**2 + final_sd**2 - 2 * correlation * baseline_sd * final_sd
    inputs: dict[str, float | str] = {
        "baseline_mean": baseline_mean,
        "baseline_sd": baseline_sd,
        "final_mean": final_mean,
        "final_sd": final_sd,
        "correlation": correlation,
    }
    result = {"mean": final_mean - baseline_mean, "sd": math.sqrt(spread)}
    return record("change-from-baseline", HANDBOOK, inputs, result, origin, trial=trial)


def correlation_from_change(
    baseline_sd: float,
    final_sd: float,
    change_sd: float,
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Correlation of two time points from three SDs: :math:`(s_b^2 + s_f^2 - s_c^2)/(2 s_b s_f)`.

    Parameters
    ----------
    baseline_sd, final_sd, change_sd : float
        SDs of one arm of a trial that reports all three.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With result ``correlation``.

    Raises
    ------
    AnalysisError
        If an input cannot be right, or no correlation fits the three SDs.
    """
    need_positive(trial, baseline_sd=baseline_sd, final_sd=final_sd, change_sd=change_sd)
    correlation = (baseline_sd**2 + final_sd**2 - change_sd**2) / (2 * baseline_sd * final_sd)
    possible = -1 <= correlation <= 1
    need(possible, "change_sd", change_sd, "fits no correlation", "|s_b - s_f| <= s_c <= s_b + s_f", trial)
    inputs: dict[str, float | str] = {
        "baseline_sd": baseline_sd,
        "final_sd": final_sd,
        "change_sd": change_sd,
    }
    return record(
        "correlation-from-change", HANDBOOK, inputs, {"correlation": correlation}, origin, trial=trial
    )
