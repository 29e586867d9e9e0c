"""One synthesis of one version: everything the report prints, as plain JSON values."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import fields
from typing import Any

from scipy.special import ndtri

from treering.intake.view import StateView as StoredState
from treering.monitoring import Look
from treering.pooling import PooledEffect
from treering.protocol import Outcome, Protocol
from treering.synthesis.arms import arms_body, without_double_counting
from treering.synthesis.estimates import Estimated, estimate_trials, method_words, pool_by, pool_planned
from treering.synthesis.looks import monitoring_block
from treering.synthesis.numbers import plain
from treering.synthesis.remarks import imputed_share, warnings
from treering.synthesis.robustness import (
    absolute_effects,
    leave_one_out_rows,
    other_methods,
    sensitivity,
    small_study,
    subgroup_blocks,
)
from treering.synthesis.trials import TrialRow, trial_rows
from treering.synthesis.unresolved import open_readings

POOLED_FIELDS = tuple(
    field.name for field in fields(PooledEffect) if field.name not in ("weights", "remarks", "level")
)


def analyse(
    state: StoredState,
    outcome: Outcome,
    protocol: Protocol,
    *,
    version: int,
    date: str,
    earlier: Sequence[Look],
) -> dict[str, Any]:
    """Analyse one outcome on the evidence as it stands.

    Parameters
    ----------
    state : StateView
        The evidence as of this version.
    outcome : Outcome
        The outcome, with its pooling and monitoring plan.
    protocol : Protocol
        The protocol in force.
    version : int
        Number of the version that is being made.
    date : str
        ISO date of the run.
    earlier : sequence of Look
        The looks already in the ledger of this synthesis, in order.

    Returns
    -------
    dict
        Plain JSON values; effects on the analysis scale; not estimable is None.

    Raises
    ------
    AnalysisError
        When the verified numbers of a trial cannot be analysed.
    """
    rows = without_double_counting(trial_rows(state, outcome, protocol))
    estimated = estimate_trials(rows, outcome)
    planned = pool_planned(estimated, estimated.main, outcome)
    unsettled = open_readings(state, rows, outcome, protocol)
    imputed = imputed_share(estimated, planned)
    body = {
        **_head(outcome, version),
        **_people(estimated.main),
        "arms": arms_body(estimated.rows, outcome.id),
        "imputed": imputed,
        "trials": _trials(estimated, planned, outcome),
        "pooled": pooled_body(planned, method_words(outcome)),
        "common": _common(estimated, outcome),
        "others": other_methods(estimated, outcome),
        "leave_one_out": leave_one_out_rows(estimated, outcome),
        "absolute": absolute_effects(planned, outcome),
        "sensitivity": sensitivity(estimated, outcome, unsettled),
        "subgroups": subgroup_blocks(estimated, outcome),
        "small_study": small_study(estimated),
        "monitoring": monitoring_block(
            estimated,
            outcome,
            protocol,
            state=state,
            earlier=earlier,
            version=version,
            date=date,
            unsettled=unsettled,
        ),
        "warnings": warnings(estimated, planned, imputed, unsettled, date),
    }
    return plain(body)  # type: ignore[no-any-return]


def _head(outcome: Outcome, version: int) -> dict[str, Any]:
    return {
        "synthesis": outcome.id,
        "version": version,
        "title": outcome.title,
        "question": outcome.question,
        "measure": outcome.measure,
        "scale": "log" if outcome.is_ratio else "plain",
        "role": outcome.role,
        "better": outcome.better,
        "unit": outcome.unit,
        "mid": outcome.on_analysis_scale(outcome.minimally_important),
        "comparator_risk": outcome.comparator_risk,
    }


def arm_total(row: TrialRow, side: str) -> int | None:
    """Return the people analysed in one arm ("intervention" or "comparator"), or None if not reported."""
    total = row.values.get(f"{side}_total")
    return None if total is None else int(total)


def _people(rows: Sequence[TrialRow]) -> dict[str, Any]:
    totals = [arm_total(row, side) for row in rows for side in ("intervention", "comparator")]
    events = [row.values.get(f"{side}_events") for row in rows for side in ("intervention", "comparator")]
    return {
        "k": len(rows),
        "participants": sum(total for total in totals if total is not None),
        "effective_participants": sum(
            (arm_total(row, side) or 0) / row.design_effect
            for row in rows
            for side in ("intervention", "comparator")
        ),
        "participants_unknown": sum(1 for total in totals if total is None) // 2,
        "events": None if any(e is None for e in events) or not events else sum(e or 0 for e in events),
    }


def _trials(estimated: Estimated, planned: PooledEffect | None, outcome: Outcome) -> list[dict[str, Any]]:
    weights = (
        {} if planned is None else dict(zip((r.trial for r in estimated.main), planned.weights, strict=True))
    )
    reach = float(ndtri((1 + outcome.pooling.level) / 2))
    return [_trial(row, estimated, weights.get(row.trial), reach) for row in estimated.rows]


def _trial(row: TrialRow, estimated: Estimated, weight: float | None, reach: float) -> dict[str, Any]:
    estimate = error = float("nan")
    if row.trial in estimated.effects.index:
        estimate = float(estimated.effects.loc[row.trial, "estimate"])  # type: ignore[arg-type]
        error = float(estimated.effects.loc[row.trial, "variance"]) ** 0.5  # type: ignore[arg-type]
    return {
        "trial": row.trial,
        "label": row.label,
        "year": row.published[:4],
        "published": row.published,
        "report": row.report,
        "values": row.values,
        "intervention_total": arm_total(row, "intervention"),
        "comparator_total": arm_total(row, "comparator"),
        "estimate": estimate,
        "standard_error": error,
        "ci_low": estimate - reach * error,
        "ci_high": estimate + reach * error,
        "weight": weight,
        "in_main": row.left_out is None,
        "status": row.status,
        "left_out": row.left_out,
        "flags": row.flags,
        "risk_of_bias": row.risk_of_bias,
        "basis": row.basis,
        "imputed": row.imputed,
        "design_effect": row.design_effect,
        "subgroup": row.subgroup,
    }


def pooled_body(pooled: PooledEffect | None, method: str) -> dict[str, Any] | None:
    """Return the fields of a pooled effect that are stored and printed; None stays None."""
    if pooled is None:
        return None
    return {name: getattr(pooled, name) for name in POOLED_FIELDS} | {"method": method}


def _common(estimated: Estimated, outcome: Outcome) -> dict[str, Any] | None:
    if not estimated.main:
        return None
    common = pool_by(outcome.pooling, *estimated.numbers(estimated.main), model="common")
    return pooled_body(common, "common effect, inverse variance")
