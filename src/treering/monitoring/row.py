"""The numbers of a ledger row that come from the planned test and the critical values."""

from __future__ import annotations

import math
from typing import Any

from treering.monitoring.anytime import mixture_interval
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import PlannedTest
from treering.monitoring.verdict import Finding
from treering.terms import Verdict


def effect_fields(plan: MonitoringPlan, test: PlannedTest | None) -> dict[str, Any]:
    """Return estimate, interval, information and the re-estimated sizes by field name.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    test : PlannedTest or None
        The planned test; None without a usable trial.

    Returns
    -------
    dict
        Fields of `Look`.
    """
    names = ("estimate", "standard_error", "ci_low", "ci_high", "mixture_low", "mixture_high", "p")
    if test is None:
        sizes = ("required_reestimated", "fraction_reestimated", "diversity_reestimated")
        return dict.fromkeys(names + sizes) | {"information": 0.0}
    pooled = test.pooled
    low = high = None
    if pooled.standard_error > 0.0:  # zero for a plain Knapp-Hartung test of equal estimates
        low, high = mixture_interval(
            pooled.estimate, pooled.standard_error, prior_sd=plan.mixture_prior_sd, alpha=plan.alpha
        )
    values = (pooled.estimate, pooled.standard_error, pooled.ci_low, pooled.ci_high, low, high)
    return dict(zip(names, (*values, test.p), strict=True)) | _reestimated(plan, test)


def _reestimated(plan: MonitoringPlan, test: PlannedTest) -> dict[str, float | None]:
    """Return information and the required one under the diversity of the present trials."""
    diversity = None if math.isnan(test.pooled.d2) else min(max(test.pooled.d2, 0.0), 1.0)
    required = None
    if diversity is not None and diversity < 1.0:
        required = plan.required_information * (1.0 - plan.diversity) / (1.0 - diversity)
    return {
        "information": test.information,
        "diversity_reestimated": diversity,
        "required_reestimated": required,
        "fraction_reestimated": None if required is None else test.information / required,
    }


def adjusted_fields(
    plan: MonitoringPlan, found: Finding, test: PlannedTest | None, verdict: Verdict
) -> dict[str, Any]:
    """Return fraction, critical values and the repeated interval by field name.

    A look that cannot spend shows a redrawn boundary only when a crossing was compared with it: anything
    else would draw a line that judges nothing.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    found : Finding
        What the look found.
    test : PlannedTest or None
        The planned test; None without a usable trial.
    verdict : Verdict
        What the look was judged.

    Returns
    -------
    dict
        Fields of `Look`.
    """
    required = plan.required_information
    compared = verdict not in (Verdict.CANNOT_BE_JUDGED, Verdict.REACHED_WITHOUT_CROSSING)
    redrawn = found.redrawn if compared and not found.spends else None
    low, high = _repeated(plan, found.boundary if found.spends else redrawn, test)
    return {
        "required": required,
        "required_inflated": None if found.inflation is None else required * found.inflation,
        "fraction": found.fraction,
        "z": found.z,
        "boundary": found.boundary,
        "redrawn_boundary": redrawn,
        "futility": found.futility if found.spends else found.redrawn_futility,
        "adjusted_low": low,
        "adjusted_high": high,
    }


def _repeated(
    plan: MonitoringPlan, critical: float | None, test: PlannedTest | None
) -> tuple[float | None, float | None]:
    """Return the repeated interval; a one-sided plan bounds the effect on one side only."""
    if critical is None or test is None or test.z is None:
        return None, None
    low, high = test.limits_at(critical)
    if plan.sides == 2:
        return low, high
    return (low, None) if plan.tested_direction > 0 else (None, high)
