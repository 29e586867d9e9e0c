"""When will we know: what the ongoing trials of an outcome are likely to bring, and when."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from treering.monitoring import Look, MonitoringPlan, OngoingTrial, forecast
from treering.protocol import Outcome
from treering.synthesis.standing import StateView
from treering.terms import EntryKind


def ongoing_trials(
    state: StateView, outcome: Outcome, reported: Sequence[str], per_participant: float | None
) -> list[OngoingTrial]:
    """Return the ongoing trials that measure an outcome and have not reported it yet.

    Parameters
    ----------
    state : StateView
        The evidence as of one version.
    outcome : Outcome
        The outcome.
    reported : sequence of str
        Trials with a verified result.
    per_participant : float or None
        Information that one participant brings; None when it is not known.

    Returns
    -------
    list of OngoingTrial
    """
    trials = []
    for entry in state.live(EntryKind.ONGOING):
        body = entry.body
        if outcome.id in (body.get("outcomes") or [outcome.id]) and body["trial"] not in reported:
            planned = body.get("planned")
            trials.append(
                OngoingTrial(
                    trial=body["trial"],
                    information=None if planned is None or not per_participant else planned * per_participant,
                    end=body.get("expected_end"),
                )
            )
    return trials


def outlook(
    plan: MonitoringPlan,
    ledger: Sequence[Look],
    estimates: Any,
    variances: Any,
    ongoing: Sequence[OngoingTrial],
    *,
    today: str,
    lag_days: int,
) -> dict[str, Any] | None:
    """Say when the fraction is likely to reach 1 and with what chance a boundary is crossed by then.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    ledger : sequence of Look
        All looks, oldest first.
    estimates, variances : ndarray, shape (k,)
        The trials in the main analysis.
    ongoing : sequence of OngoingTrial
        Trials that have not reported.
    today : str
        ISO date of the version.
    lag_days : int
        Days from a trial's end to its report, from the protocol.

    Returns
    -------
    dict or None
        None when no trial is ongoing or no look was made.
    """
    if not ongoing or not ledger or len(estimates) == 0:
        return None
    found = forecast(plan, ledger, estimates, variances, ongoing, today=today, lag_days=lag_days)
    return {**found.to_dict(), "lag_days": lag_days}
