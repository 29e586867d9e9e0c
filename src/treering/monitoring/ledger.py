"""The next row of the ledger, from the rows before it and the evidence at hand.

The ledger records looks as they happened. It belongs to one plan: after an amendment that touches the
monitoring a new ledger begins, and the alpha already spent carries over. What carries over is taken off
the new ledger's alpha, so that by Bonferroni's inequality the two ledgers together keep the plan's alpha
whatever their looks have in common.

A run without new verified data is no look: do not call `next_look` for it (it refuses). An analysis
whose pooled result anyone saw before the release is a look of its own: call `next_look` for each.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import date as calendar_date

from numpy.typing import ArrayLike

from treering.errors import AmendmentError, AnalysisError
from treering.monitoring.finding import LEAST_ALPHA, LedgerState, find
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import PlannedTest, as_planned_test, check_trials, planned_test
from treering.monitoring.redrawn import spent_at
from treering.monitoring.row import adjusted_fields, effect_fields
from treering.monitoring.verdict import judge, standing
from treering.pooling import PooledEffect

#: Looks may be stored with ten significant digits; data that differ by less have not changed.
SAME_DATA = 1e-8


def ledger_state(plan: MonitoringPlan, earlier: Sequence[Look]) -> LedgerState:
    """Read off the earlier looks what the ledger of this plan has used up.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan now in force.
    earlier : sequence of Look
        All looks of the outcome, oldest first.

    Returns
    -------
    LedgerState
    """
    digest = plan.digest()
    opened = len(earlier)
    while opened and earlier[opened - 1].plan_digest == digest:
        opened -= 1
    spending = [look for look in earlier[opened:] if look.spends]
    carried = earlier[opened - 1].alpha_spent if opened else 0.0
    return LedgerState(
        carried=carried,
        spent=earlier[-1].alpha_spent if earlier else 0.0,
        available=max(plan.alpha - carried, 0.0),
        highest=max((look.fraction for look in spending), default=0.0),
        used=tuple((look.information, look.boundary) for look in spending),
        finished=any(look.fraction >= 1.0 for look in spending),
    )


def next_look(
    plan: MonitoringPlan,
    earlier: Sequence[Look],
    *,
    date: str,
    version: int,
    trials: Sequence[str],
    estimates: ArrayLike = (),
    variances: ArrayLike = (),
    pooled: PooledEffect | None = None,
    amendment: str | None = None,
) -> Look:
    """Make the next look of one outcome.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan now in force.
    earlier : sequence of Look
        All looks of the outcome so far, oldest first.
    date : str
        Day of the look (the day the evidence was verified, never a publication year), ISO 8601.
    version : int
        Version of the evidence.
    trials : sequence of str
        Trials in the analysis now.
    estimates, variances : array_like, shape (k,)
        Their effects on the analysis scale with variances. Left out when `pooled` is given.
    pooled : PooledEffect, optional
        The planned pooled effect when it does not come from estimates and variances (Mantel-Haenszel,
        Peto). It must be a common-effect one: its variance is the information.
    amendment : str, optional
        Identifier of the amendment that changed the plan since the last look.

    Returns
    -------
    Look

    Raises
    ------
    AmendmentError
        When the plan differs from the one of the last look and no amendment is named.
    AnalysisError
        When the input cannot be used, goes back in time, or holds nothing new.
    """
    _check_order(earlier, date, version)
    test = _test(plan, trials, estimates, variances, pooled)
    amended = _amended(plan, earlier, amendment)
    new_data = not (earlier and _same_data(earlier[-1], trials, test))
    if not (new_data or amended):
        raise AnalysisError(
            "There is no new verified data since the last look: a run without it is no look.",
            version=version,
            found=f"the trials and the estimate of look {earlier[-1].number}",
            expected="a trial, a correction or a removal since then",
            next_step="Renew the status line and make no look.",
        )
    state = ledger_state(plan, earlier)
    found = find(plan, state, test, new_data=new_data)
    verdict, why = judge(plan, standing(earlier), found)
    spent = state.carried + spent_at(plan, found.fraction, state.available) if found.spends else state.spent
    return Look(
        number=len(earlier) + 1,
        date=date,
        version=version,
        trials=tuple(str(trial) for trial in trials),
        spends=found.spends,
        alpha_spent=max(state.spent, spent),
        verdict=verdict,
        plan_digest=plan.digest(),
        remarks=why + _ledger_remarks(state, amendment if amended else None, new_data=new_data),
        **effect_fields(plan, test),
        **adjusted_fields(plan, found, test, verdict),
    )


def holds_new_data(
    plan: MonitoringPlan,
    earlier: Sequence[Look],
    *,
    trials: Sequence[str],
    estimates: ArrayLike = (),
    variances: ArrayLike = (),
    pooled: PooledEffect | None = None,
) -> bool:
    """Return whether the evidence differs from that of the last look; without it there is no look.

    Parameters
    ----------
    plan, earlier, trials, estimates, variances, pooled
        As in `next_look`.

    Returns
    -------
    bool
        False for the data of the last look, in any order of the trials and to ten significant digits; and
        False before the first look while there is no trial.

    Raises
    ------
    AnalysisError
        When the trials cannot be analysed.
    """
    test = _test(plan, trials, estimates, variances, pooled)
    if not earlier:
        return test is not None
    return not _same_data(earlier[-1], trials, test)


def _check_order(earlier: Sequence[Look], date: str, version: int) -> None:
    """Refuse a look that is not after the last one."""
    try:
        calendar_date.fromisoformat(date)
    except ValueError as error:
        raise AnalysisError(
            "The date of the look is not a day.", found=date, expected="ISO 8601, for example 2031-04-02"
        ) from error
    if earlier and (date < earlier[-1].date or version < earlier[-1].version):
        raise AnalysisError(
            "A look cannot be put before one that has happened.",
            version=version,
            found=f"{date}, version {version}",
            expected=f"{earlier[-1].date} or later, version {earlier[-1].version} or later",
            next_step="A trial found late enters at the look when it was verified.",
        )


def _test(
    plan: MonitoringPlan,
    trials: Sequence[str],
    estimates: ArrayLike,
    variances: ArrayLike,
    pooled: PooledEffect | None,
) -> PlannedTest | None:
    """Make the planned test from the trials, or take the pooled effect as given."""
    if pooled is not None:
        return as_planned_test(plan, pooled) if trials else None
    _, y, v = check_trials(trials, estimates, variances)
    return planned_test(plan, y, v)


def _amended(plan: MonitoringPlan, earlier: Sequence[Look], amendment: str | None) -> bool:
    """Return whether a new ledger begins, and refuse a silent change of plan."""
    changed = bool(earlier) and earlier[-1].plan_digest != plan.digest()
    if changed and not amendment:
        raise AmendmentError(
            "The monitoring plan differs from the one of the last look and no amendment says so.",
            found=f"plan {plan.digest()[:12]}",
            expected=f"plan {earlier[-1].plan_digest[:12]}",
            next_step="Write a dated amendment with its author and reason, or restore the plan.",
        )
    return changed


def _same_data(last: Look, trials: Sequence[str], test: PlannedTest | None) -> bool:
    """Return whether trials, estimate, standard error and information are those of the last look."""
    if sorted(last.trials) != sorted(trials):
        return False
    if test is None or last.estimate is None or last.standard_error is None:
        return test is None and last.estimate is None
    error, information = test.pooled.standard_error, test.information
    # Rounding moves an estimate by a share of itself, which may be far more than such a share of its error.
    size = max(error, abs(last.estimate))
    return (
        abs(test.pooled.estimate - last.estimate) <= SAME_DATA * size
        and math.isclose(error, last.standard_error, rel_tol=SAME_DATA)
        and math.isclose(information, last.information, rel_tol=SAME_DATA)
    )


def _ledger_remarks(state: LedgerState, amendment: str | None, *, new_data: bool) -> tuple[str, ...]:
    """Say what an amendment did to the ledger and whether alpha is left at all."""
    remarks = []
    if amendment is not None:
        remarks.append(
            f"Amendment {amendment}: the earlier ledger is closed; {state.carried:.4g} of alpha was spent in "
            f"it and carries over, {state.available:.4g} is left."
        )
    if not new_data:
        remarks.append("No new verified data came with the amendment, so this look spends nothing.")
    if state.available <= LEAST_ALPHA:
        remarks.append("All alpha is spent: only a new protocol can begin a new watch.")
    return tuple(remarks)
