"""The monitoring of one synthesis: the ledger's next look and what is shown beside it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from treering.monitoring import (
    PER_TAIL_CONVENTION,
    Look,
    MonitoringPlan,
    RestsOn,
    hindsight,
    holds_new_data,
    information_per_participant,
    minimum_trials,
    next_look,
    rests_on,
    second_opinions,
)
from treering.monitoring.verdict import standing
from treering.protocol import Outcome, Protocol
from treering.synthesis.estimates import Estimated
from treering.synthesis.outlook import ongoing_trials, outlook
from treering.synthesis.standing import StateView
from treering.synthesis.unresolved import OpenReading, before_withheld, withheld
from treering.terms import CROSSED, Measure


def plan_of(outcome: Outcome) -> MonitoringPlan | None:
    """Return the monitoring plan of an outcome on its analysis scale; None when it is not monitored."""
    planned = outcome.monitoring
    if planned is None:
        return None
    return MonitoringPlan(
        effect=outcome.on_analysis_scale(planned.effect),
        better=outcome.better,
        role=outcome.role,
        alpha=planned.alpha,
        sides=planned.sides,
        power=planned.power,
        spending=planned.spending,
        spending_parameter=planned.spending_parameter,
        diversity=planned.diversity,
        model=outcome.pooling.model,
        tau2=outcome.pooling.tau2,
        interval=outcome.pooling.interval,
        futility=planned.futility,
        prior_sd=planned.prior_sd,
        level=outcome.pooling.level,
        prediction_df=outcome.pooling.prediction_df,
    )


def monitoring_block(
    estimated: Estimated,
    outcome: Outcome,
    protocol: Protocol,
    *,
    state: StateView,
    earlier: Sequence[Look],
    version: int,
    date: str,
    unsettled: Sequence[OpenReading] = (),
) -> dict[str, Any] | None:
    """Make the look that the evidence calls for and what is printed beside it.

    Parameters
    ----------
    estimated : Estimated
        Effects of the outcome.
    outcome : Outcome
        With its monitoring plan.
    protocol : Protocol
        For the amendments, the sum of alpha and the lag of reports.
    state : StateView
        For the ongoing trials.
    earlier : sequence of Look
        The ledger so far.
    version, date
        Of the version that is being made.
    unsettled : sequence of OpenReading
        Readings that wait for a decision: no crossing is declared while the verdict hangs on them.

    Returns
    -------
    dict or None
        None when the outcome is not monitored.
    """
    plan = plan_of(outcome)
    if plan is None:
        return None
    estimates, variances = estimated.numbers(estimated.main)
    trials = [row.trial for row in estimated.main]
    ledger = list(earlier)
    per_participant = _per_participant(outcome, estimated)
    made = _new_look(plan, ledger, estimated, unsettled, protocol, version=version, date=date)
    fresh = made is not None
    open_verdicts: list[dict[str, Any]] = []
    if made is not None:
        look, open_verdicts = made
        ledger.append(look)
    return {
        "plan": plan.to_dict(),
        "inputs": _inputs(outcome, protocol, estimated),
        "total_alpha": sum(o.monitoring.alpha for o in protocol.outcomes if o.monitoring),
        "new_look": fresh,
        "unsettled": open_verdicts,
        "look": ledger[-1].to_dict() if ledger else None,
        "looks": [look.to_dict() for look in ledger],
        "hindsight": _hindsight(plan, estimated),
        "outlook": outlook(
            plan,
            ledger,
            estimates,
            variances,
            ongoing_trials(state, outcome, [row.trial for row in estimated.rows], per_participant),
            today=date,
            lag_days=protocol.living.report_lag_days,
        ),
        **_beside(plan, ledger, trials, estimates, variances, per_participant),
    }


def _new_look(
    plan: MonitoringPlan,
    ledger: Sequence[Look],
    estimated: Estimated,
    unsettled: Sequence[OpenReading],
    protocol: Protocol,
    *,
    version: int,
    date: str,
) -> tuple[Look, list[dict[str, Any]]] | None:
    """Make the look that the evidence calls for, with the verdict under each open reading; or none."""
    tried = [reading for reading in unsettled if _differs(reading, estimated)]
    before = list(ledger)
    if not _is_new(plan, before, estimated):
        before = before_withheld(ledger)
        if tried or len(before) == len(ledger):
            return None
    amended = _plan_changed(plan, before) and bool(protocol.amendments)
    amendment = protocol.amendments[-1].date.isoformat() if amended else None

    def look_at(found: Estimated) -> Look:
        names = [row.trial for row in found.main]
        y, v = found.numbers(found.main)
        look = next_look(
            plan, before, date=date, version=version, trials=names, estimates=y, variances=v,
            amendment=amendment,
        )  # fmt: skip
        return replace(look, number=len(ledger) + 1)

    under = [look_at(reading.estimated) for reading in tried]
    look = withheld(look_at(estimated), before, standing(before).verdict, under)
    verdicts = [
        {"trial": reading.trial, "reader": reading.reader, "verdict": other.verdict}
        for reading, other in zip(tried, under, strict=True)
    ]
    return look, verdicts


def _is_new(plan: MonitoringPlan, ledger: Sequence[Look], estimated: Estimated) -> bool:
    y, v = estimated.numbers(estimated.main)
    names = [row.trial for row in estimated.main]
    return _plan_changed(plan, ledger) or holds_new_data(plan, ledger, trials=names, estimates=y, variances=v)


def _differs(reading: OpenReading, estimated: Estimated) -> bool:
    """Say whether a reading would change the main analysis at all; one that gives no effect does not."""
    one, other = reading.estimated, estimated
    if [row.trial for row in one.main] != [row.trial for row in other.main]:
        return True
    return not np.array_equal(one.numbers(one.main), other.numbers(other.main))


def _plan_changed(plan: MonitoringPlan, ledger: Sequence[Look]) -> bool:
    return bool(ledger) and ledger[-1].plan_digest != plan.digest()


def _inputs(outcome: Outcome, protocol: Protocol, estimated: Estimated) -> dict[str, Any]:
    """Return what must be printed beside every monitoring figure."""
    planned = outcome.monitoring
    if planned is None:
        return {}
    return {
        "effect_natural": planned.effect,
        "effect_reason": planned.effect_reason,
        "diversity_reason": planned.diversity_reason,
        "convention": PER_TAIL_CONVENTION,
        "comparator_risk": outcome.comparator_risk,
        "observed_comparator_risk": _observed_risk(estimated),
        "information_per_participant": _per_participant(outcome, estimated),
        "amendments": [amendment.date.isoformat() for amendment in protocol.amendments],
    }


def _observed_risk(estimated: Estimated) -> float | None:
    events = [row.values.get("comparator_events") for row in estimated.main]
    totals = [row.values.get("comparator_total") for row in estimated.main]
    if not events or None in events or None in totals:
        return None
    return sum(e or 0 for e in events) / sum(t or 0 for t in totals)


def _per_participant(outcome: Outcome, estimated: Estimated) -> float | None:
    """Information that one participant brings; from the protocol's risks, or as observed so far."""
    risk = outcome.comparator_risk
    if outcome.measure is Measure.RISK_RATIO and risk and outcome.monitoring:
        return information_per_participant(
            outcome.measure, comparator_risk=risk, intervention_risk=risk * outcome.monitoring.effect
        )
    people = sum(
        row.values.get("intervention_total", 0) + row.values.get("comparator_total", 0)
        for row in estimated.main
    )
    _, variances = estimated.numbers(estimated.main)
    return float((1 / variances).sum() / people) if people else None


def _hindsight(plan: MonitoringPlan, estimated: Estimated) -> list[dict[str, Any]]:
    rows = estimated.main
    if not rows:
        return []
    estimates, variances = estimated.numbers(rows)
    curve = hindsight(
        plan,
        dates=[row.published for row in rows],
        trials=[row.trial for row in rows],
        estimates=estimates,
        variances=variances,
    )
    points: list[dict[str, Any]] = curve.to_dict()["points"]
    return [point | {"trial": ", ".join(point["trials"])} for point in points]


def _beside(
    plan: MonitoringPlan,
    ledger: Sequence[Look],
    trials: Sequence[str],
    estimates: Any,
    variances: Any,
    per_participant: float | None,
) -> dict[str, Any]:
    """Return the second opinions, what the crossing rests on, and how many trials are needed at least."""
    if not trials or not ledger:
        return {"opinions": [], "agree": None, "rests_on": None, "minimum_trials": None}
    strip = second_opinions(plan, ledger, estimates, variances)
    crossed = ledger[-1].verdict in CROSSED
    rests = rests_on(plan, ledger, trials, estimates, variances) if crossed else None
    tau2 = next_tau2(plan, estimates, variances)
    return {
        "opinions": [opinion.to_dict() for opinion in strip.opinions],
        "agree": strip.agree,
        "rests_on": None if rests is None else _rests_body(rests, per_participant),
        "minimum_trials": minimum_trials(
            plan.effect, tau2, alpha=plan.alpha, power=plan.power, sides=plan.sides
        ),
    }


def _rests_body(rests: RestsOn, per_participant: float | None) -> dict[str, Any]:
    """Return what a crossing rests on, with the null trial also told in participants."""
    people = None
    if rests.null_information is not None and per_participant:
        people = math.ceil(rests.null_information / per_participant)
    return rests.to_dict() | {"null_participants": people}


def next_tau2(plan: MonitoringPlan, estimates: Any, variances: Any) -> float:
    """Return the planned tau2 of the data; 0 for one trial or a common-effect plan."""
    from treering.pooling import pool

    if len(estimates) < 2 or plan.model == "common":
        return 0.0
    return pool(estimates, variances, tau2=plan.tau2).tau2
