"""What stands beside the headline: other methods, subsets, subgroups, absolute effects, small studies."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from treering.pooling import (
    PooledEffect,
    SubgroupEffect,
    egger,
    leave_one_out,
    pool,
    pool_mantel_haenszel,
    pool_peto,
    subgroup_analysis,
)
from treering.pooling import absolute_effects as per_people
from treering.protocol import Outcome
from treering.synthesis.estimates import UNUSABLE, Estimated, pool_planned, values_table
from treering.synthesis.trials import TrialRow
from treering.synthesis.unresolved import OpenReading
from treering.terms import Judgement, Measure

WITH_ABSOLUTE = frozenset(
    {
        Measure.RISK_RATIO,
        Measure.ODDS_RATIO,
        Measure.RISK_DIFFERENCE,
        Measure.PETO_ODDS_RATIO,
        Measure.HAZARD_RATIO,
    }
)
MANTEL_HAENSZEL = frozenset({Measure.RISK_RATIO, Measure.ODDS_RATIO, Measure.RISK_DIFFERENCE})
#: Small-study tests need about ten trials (Sterne et al. 2011, BMJ 343:d4002).
FEWEST_FOR_SMALL_STUDY = 10


def _short(pooled: PooledEffect, name: str, note: str = "") -> dict[str, Any]:
    return {
        "name": name,
        "k": pooled.k,
        "estimate": pooled.estimate,
        "standard_error": pooled.standard_error,
        "ci_low": pooled.ci_low,
        "ci_high": pooled.ci_high,
        "tau2": pooled.tau2,
        "note": note,
    }


def other_methods(estimated: Estimated, outcome: Outcome) -> list[dict[str, Any]]:
    """Pool the main trials by other methods: tau2 estimators, intervals, Mantel-Haenszel, Peto.

    Parameters
    ----------
    estimated : Estimated
        Effects of the outcome.
    outcome : Outcome
        Its plan, for level and measure.

    Returns
    -------
    list of dict
        Name, k, estimate and interval on the analysis scale.
    """
    rows = estimated.main
    if len(rows) < 2:
        return []
    numbers = estimated.numbers(rows)
    level = outcome.pooling.level
    names = {
        "DerSimonian-Laird, Wald interval": ("dersimonian-laird", "wald"),
        "Paule-Mandel, modified Knapp-Hartung interval": ("paule-mandel", "modified-knapp-hartung"),
        "REML, Wald interval": ("reml", "wald"),
        "REML, modified Knapp-Hartung interval": ("reml", "modified-knapp-hartung"),
    }
    others = [
        _short(pool(*numbers, tau2=tau2, interval=interval, level=level), name)
        for name, (tau2, interval) in names.items()
    ]
    counted = [row for row in estimated.rows if row.status == "included"]  # zero cells count here
    if outcome.measure in MANTEL_HAENSZEL:
        others.append(_short(pool_mantel_haenszel(values_table(counted), outcome.measure), "Mantel-Haenszel"))
    if outcome.measure in (Measure.ODDS_RATIO, Measure.PETO_ODDS_RATIO):
        others.append(_short(pool_peto(values_table(counted)), "Peto"))
    return others


def leave_one_out_rows(estimated: Estimated, outcome: Outcome) -> list[dict[str, Any]]:
    """Pool the main trials without each one in turn; empty for fewer than three trials."""
    rows, plan = estimated.main, outcome.pooling
    if len(rows) < 3:
        return []
    left = leave_one_out(
        *estimated.numbers(rows),
        model=plan.model,
        tau2=plan.tau2,
        interval=plan.interval,
        level=plan.level,
    )
    return [
        {
            "trial": row.trial,
            **{name: left[name].iloc[i] for name in ("estimate", "ci_low", "ci_high", "tau2")},
        }
        for i, row in enumerate(rows)
    ]


def sensitivity(
    estimated: Estimated, outcome: Outcome, unsettled: Sequence[OpenReading] = ()
) -> list[dict[str, Any]]:
    """Pool by the plan on other sets of trials: low risk of bias, with those left out by a notice.

    Parameters
    ----------
    estimated : Estimated
        Effects of the outcome.
    outcome : Outcome
        Its plan.
    unsettled : sequence of OpenReading
        Readings that wait for a decision; each is tried in its trial's place.

    Returns
    -------
    list of dict
        One per variant whose set of trials differs from the main one.
    """
    main = estimated.main
    with_effect = estimated.effects.dropna().index
    known = [row for row in estimated.rows if row.trial in with_effect and row.status not in UNUSABLE]
    flagged = [row for row in main if not any("expression of concern" in flag for flag in row.flags)]
    variants: list[tuple[str, Sequence[TrialRow], str]] = [
        ("low risk of bias only", [r for r in main if r.risk_of_bias == Judgement.LOW], ""),
        ("without high risk of bias", [r for r in main if r.risk_of_bias != Judgement.HIGH], ""),
        ("with retracted and held trials", known, "shown so that the effect of leaving them out can be seen"),
        ("without trials under an expression of concern", flagged, ""),
        ("without imputed numbers", [r for r in main if not r.imputed], ""),
    ]
    result = []
    for name, rows, note in variants:
        if {r.trial for r in rows} == {r.trial for r in main}:
            continue
        result.append(_variant(estimated, rows, outcome, name, note))
    for reading in unsettled:
        name = f"with {reading.trial} as {reading.reader} read it"
        found = reading.estimated
        result.append(_variant(found, found.main, outcome, name, "the two readings are not settled"))
    return result


def _variant(
    estimated: Estimated, rows: Sequence[TrialRow], outcome: Outcome, name: str, note: str
) -> dict[str, Any]:
    pooled = pool_planned(estimated, rows, outcome)
    if pooled is None:
        return {"name": name, "k": 0, "estimate": None, "ci_low": None, "ci_high": None,
                "tau2": None, "note": "no trial left"}  # fmt: skip
    return _short(pooled, name, note)


def subgroup_blocks(estimated: Estimated, outcome: Outcome) -> list[dict[str, Any]]:
    """Compare the planned subgroups by an interaction test; trials without a level are counted apart."""
    return [_subgroup(estimated, outcome, name) for name in outcome.subgroups if estimated.main]


def _subgroup(estimated: Estimated, outcome: Outcome, name: str) -> dict[str, Any]:
    rows = [row for row in estimated.main if name in row.subgroup]
    levels = sorted({row.subgroup[name] for row in rows})
    missing = len(estimated.main) - len(rows)
    if len(levels) < 2:
        return {"name": name, "planned": True, "levels": [], "without_level": missing,
                "q": None, "q_df": None, "p": None, "why": "fewer than two levels with trials"}  # fmt: skip
    numbers = estimated.numbers(rows)
    test = subgroup_analysis(
        *numbers,
        [row.subgroup[name] for row in rows],
        model=outcome.pooling.model,
        tau2=outcome.pooling.tau2,
        interval=outcome.pooling.interval,
        level=outcome.pooling.level,
    )
    return {
        "name": name,
        "planned": True,
        "without_level": missing,
        "levels": [_level(group) for group in sorted(test.groups, key=lambda group: group.label)],
        "test": test.test_name,
        "q": test.test,
        "q_df": test.test_df,
        "p": test.test_p,
        "why": "",
    }


def _level(group: SubgroupEffect) -> dict[str, Any]:
    fields = ("k", "estimate", "ci_low", "ci_high", "tau2")
    return {"level": group.label} | {name: getattr(group, name) for name in fields}


def small_study(estimated: Estimated) -> dict[str, Any]:
    """Egger's regression when there are ten trials or more; otherwise the reason why it is not done."""
    k = len(estimated.main)
    if k < FEWEST_FOR_SMALL_STUDY:
        return {"done": False, "why": f"{k} trials; the test is read with ten or more only"}
    test = egger(*estimated.numbers(estimated.main))
    return {
        "done": True,
        "why": "",
        "name": "Egger regression",
        "intercept": test.intercept,
        "standard_error": test.standard_error,
        "p": test.p,
    }


def absolute_effects(planned: PooledEffect | None, outcome: Outcome) -> dict[str, Any] | None:
    """Effect per 1000 people at the protocol's comparator risk; None without one."""
    if planned is None or outcome.comparator_risk is None or outcome.measure not in WITH_ABSOLUTE:
        return None
    (effect,) = per_people(planned, outcome.measure, outcome.comparator_risk)
    return {
        "comparator_risk": outcome.comparator_risk,
        "per": effect.per,
        "comparator": effect.comparator,
        "intervention": effect.intervention,
        "difference": effect.difference,
        "low": effect.difference_low,
        "high": effect.difference_high,
        "why": "a risk had to be cut at 0 or 1: the measure does not fit this risk" if effect.cut else "",
    }
