"""Numbers of one result that can be, but are worth a second look."""

from __future__ import annotations

import math
from collections.abc import Sequence
from statistics import median

import pandas as pd

from treering.effects import effect_sizes
from treering.effects.table import ROUTES
from treering.intake.numbers import ARMS, Finding, Numbers
from treering.protocol import Outcome
from treering.terms import RATIO_MEASURES

# An interval whose middle lies further from the estimate than this share of its half-width, beyond what
# rounding explains, is not symmetric on the scale of the analysis (our choice, no source).
_LOPSIDED = 0.15
# How far a report's own ratio may lie from ours, as a log ratio, and a difference in standard errors, before
# someone should look (our choice; MECIR C51 asks for the comparison and names no size).
_OWN_RATIO, _OWN_DIFFERENCE = 0.05, 0.25


def number_remarks(values: Numbers, outcome: Outcome, *, usual_sds: Sequence[float] = ()) -> list[Finding]:
    """Find what is possible in the numbers of one result but worth a second look.

    Parameters
    ----------
    values : mapping of str to number
        Numbers that :func:`number_faults` found nothing wrong with.
    outcome : Outcome
        The outcome of the protocol.
    usual_sds : sequence of float
        Standard deviations of the outcome in the trials known so far.

    Returns
    -------
    list of Finding
    """
    return [
        *_looks_like_standard_error(values, usual_sds),
        *_lopsided(values, outcome.measure in RATIO_MEASURES),
        *_differs_from_own(values, outcome),
    ]


def _looks_like_standard_error(values: Numbers, usual_sds: Sequence[float]) -> list[Finding]:
    """Find an SD that is about the usual SD, or the other arm's, divided by the root of its arm's size.

    Mistaking a standard error for a standard deviation is one of the errors Gøtzsche et al. found
    (JAMA 2007;298:430); the window of a factor 1.5 around the ratio root n is our choice.
    """
    remarks = []
    for arm, other in (ARMS, ARMS[::-1]):
        sd, total = values.get(f"{arm}_sd"), values.get(f"{arm}_total")
        references = [*([median(usual_sds)] if usual_sds else [])]
        references += [values[f"{other}_sd"]] if f"{other}_sd" in values else []
        if sd is None or total is None or total < 10:
            continue
        if any(1 / 1.5 < sd * math.sqrt(total) / usual < 1.5 for usual in references):
            sentence = f"{sd} may be a standard error: times the root of {total} it is the usual deviation."
            remarks.append(Finding(f"{arm}_sd", sentence))
    return remarks


def _half_unit(value: float) -> float:
    """Return half a unit of the last decimal that the number is written with."""
    text = repr(value)
    decimals = len(text.partition(".")[2]) if "." in text and "e" not in text else 0
    return 0.5 * 10.0**-decimals


def _lopsided(values: Numbers, is_ratio: bool) -> list[Finding]:
    if not {"estimate", "ci_low", "ci_high"} <= values.keys():
        return []
    turn = math.log if is_ratio else float
    low, middle, high = (turn(values[name]) for name in ("ci_low", "estimate", "ci_high"))
    slack = sum(
        _half_unit(values[name]) / (values[name] if is_ratio else 1)
        for name in ("ci_low", "estimate", "ci_high")
    )
    off = abs((low + high) / 2 - middle)
    if off - slack <= _LOPSIDED * (high - low) / 2:
        return []
    scale = "log " if is_ratio else ""
    return [Finding("estimate", f"the interval is not symmetric around it on the {scale}scale.")]


def _differs_from_own(values: Numbers, outcome: Outcome) -> list[Finding]:
    """Compare the report's own effect with the one its raw numbers give (MECIR C51)."""
    first = ROUTES[outcome.measure][0].columns
    own = values.get("estimate")
    if own is None or "estimate" in first or not set(first) <= values.keys():
        return []
    raw = {name: values[name] for name in first}
    effect = effect_sizes(pd.DataFrame([raw], index=["this trial"]), outcome.measure).iloc[0]
    estimate, error = float(effect["estimate"]), math.sqrt(float(effect["variance"]))
    if not math.isfinite(estimate):
        return []
    is_ratio = outcome.measure in RATIO_MEASURES
    apart = abs(math.log(own) - estimate) if is_ratio else abs(own - estimate)
    allowed = _OWN_RATIO if is_ratio else _OWN_DIFFERENCE * error
    if apart - _half_unit(own) / (own if is_ratio else 1) <= allowed:
        return []
    ours = math.exp(estimate) if is_ratio else estimate
    return [Finding("estimate", f"the report's own effect is {own}; its raw numbers give {ours:.3g}.")]
