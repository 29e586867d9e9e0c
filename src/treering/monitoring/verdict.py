"""Which verdict a look gets, from what stood before and what it found.

The rules:

* A look that spends is judged against its boundary. Beyond it: crossed. Not beyond it: a crossing that
  stood is no longer supported; otherwise the evidence goes on accruing, or has reached the required
  information without a crossing.
* A look that cannot spend judges nothing new. A crossing that stands is compared with the boundary
  redrawn at the present fraction and is still supported or no longer; anything else cannot be judged.
* A crossing that was lost stays lost until a look that spends crosses again. A look that cannot spend
  cannot bring it back, even beyond the redrawn boundary: the alpha for those fractions is gone.
* Past the required information no alpha is left. A standing crossing is compared with the redrawn
  boundary; without one the state stays "required information reached without a crossing".
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.terms import Verdict

EFFICACY = frozenset({Verdict.BENEFIT_CROSSED, Verdict.HARM_CROSSED})

#: A verdict with the sentences that explain it.
Judged = tuple[Verdict, tuple[str, ...]]


@dataclass(frozen=True, kw_only=True)
class Standing:
    """What the ledger says before a look.

    Parameters
    ----------
    verdict : Verdict or None
        Last verdict that judged something; None before the first.
    lost : Verdict or None
        Which crossing was lost, when `verdict` is "crossing no longer supported".
    since : int or None
        Number of the look that first gave the standing crossing, or lost it.
    """

    verdict: Verdict | None = None
    lost: Verdict | None = None
    since: int | None = None


@dataclass(frozen=True, kw_only=True)
class Finding:
    """What a look found, before it is judged.

    Parameters
    ----------
    z : float or None
        Z of the planned test on the analysis scale; None when it cannot be made.
    fraction, highest : float
        Information fraction now, and the highest one that spent before.
    spends : bool
        Whether the look spends alpha.
    finished : bool
        Whether all alpha was spent at an earlier look at or past the required information.
    boundary, redrawn, futility, redrawn_futility : float or None
        Critical values; None where there is none.
    inflation : float or None
        Factor on the required information that the futility bound costs.
    """

    z: float | None
    fraction: float
    highest: float
    spends: bool
    finished: bool
    boundary: float | None = None
    redrawn: float | None = None
    futility: float | None = None
    redrawn_futility: float | None = None
    inflation: float | None = None


def standing(earlier: Sequence[Look]) -> Standing:
    """Read the standing verdict off the looks so far.

    Parameters
    ----------
    earlier : sequence of Look
        All looks of the outcome, oldest first, through all its ledgers.

    Returns
    -------
    Standing
    """
    state = Standing()
    for look in earlier:
        if look.verdict is Verdict.CANNOT_BE_JUDGED:
            continue
        if look.verdict is state.verdict:
            continue
        lost = state.verdict if look.verdict is Verdict.NO_LONGER_SUPPORTED else None
        state = Standing(verdict=look.verdict, lost=lost, since=look.number)
    return state


def crossing(plan: MonitoringPlan, z: float, critical: float | None) -> Verdict | None:
    """Return the crossing that a Z makes against a critical value, if it makes one.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan; with one side only its tested direction can cross.
    z : float
        Z on the analysis scale.
    critical : float or None
        Critical Z; None when nothing could cross.

    Returns
    -------
    Verdict or None
        Benefit or harm by the sign of `z` and the plan's direction of benefit.
    """
    if critical is None or (plan.sides == 2 and abs(z) < critical):
        return None
    if plan.sides == 1 and z * plan.tested_direction < critical:
        return None
    sign = plan.tested_direction if plan.sides == 1 else (1 if z > 0 else -1)
    return Verdict.BENEFIT_CROSSED if sign == plan.benefit_direction else Verdict.HARM_CROSSED


def within_futility(plan: MonitoringPlan, z: float, bound: float | None) -> bool:
    """Return whether a Z lies within the futility bound (two-sided: in the inner wedge)."""
    if bound is None:
        return False
    return abs(z) < bound if plan.sides == 2 else z * plan.tested_direction < bound


def judge(plan: MonitoringPlan, before: Standing, found: Finding) -> Judged:
    """Give the verdict of a look.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    before : Standing
        What stood before.
    found : Finding
        What the look found.

    Returns
    -------
    tuple of Verdict and tuple of str
        The verdict in the fixed words, and sentences that explain it.
    """
    if found.z is None:
        return _untestable(before)
    if found.spends:
        return _judge_spending(plan, before, found, found.z)
    return _judge_standing(plan, before, found, found.z)


def _untestable(before: Standing) -> Judged:
    """No planned test: nothing is judged, but a crossing without its trials is not supported."""
    reason = "The planned test cannot be made with the trials at hand."
    if before.verdict in EFFICACY or before.verdict is Verdict.FUTILITY_CROSSED:
        return Verdict.NO_LONGER_SUPPORTED, (
            f"{reason} Nothing is left that supports the crossing of look {before.since}.",
        )
    if before.verdict is Verdict.NO_LONGER_SUPPORTED:
        return Verdict.NO_LONGER_SUPPORTED, (reason,)
    return Verdict.CANNOT_BE_JUDGED, (f"{reason} No alpha was spent.",)


def _judge_spending(plan: MonitoringPlan, before: Standing, found: Finding, z: float) -> Judged:
    """Judge against the boundary of this look."""
    crossed = crossing(plan, z, found.boundary)
    if crossed is not None:
        return crossed, _crossed_remarks(before, crossed)
    if before.verdict in EFFICACY:
        return Verdict.NO_LONGER_SUPPORTED, (
            f"Z is not beyond the boundary of this look; the crossing of look {before.since} is no longer "
            "supported.",
        )
    if within_futility(plan, z, found.futility) and found.fraction < 1.0:
        return Verdict.FUTILITY_CROSSED, (
            "The futility bound is non-binding: it does not end the watch, and the boundary stays as it is.",
        )
    if before.verdict is Verdict.FUTILITY_CROSSED:
        return Verdict.NO_LONGER_SUPPORTED, (
            f"Z is outside the futility bound again; the futility crossing of look {before.since} is no "
            "longer supported.",
        )
    if before.verdict is Verdict.NO_LONGER_SUPPORTED and before.lost in EFFICACY:
        return Verdict.NO_LONGER_SUPPORTED, (
            f"Alpha was spent at this look and the boundary was not crossed again since look {before.since}.",
        )
    if found.fraction >= 1.0:
        return Verdict.REACHED_WITHOUT_CROSSING, (
            "All alpha is spent; later looks have no boundary, and the anytime-valid interval goes on.",
        )
    return Verdict.ACCRUING, ()


def _crossed_remarks(before: Standing, crossed: Verdict) -> tuple[str, ...]:
    """Say how a crossing relates to what stood before."""
    if before.verdict is crossed:
        return (f"The crossing of look {before.since} is still supported, at the boundary of this look.",)
    if before.verdict in EFFICACY:
        return (f"The earlier {before.verdict} (look {before.since}) is no longer supported.",)
    if before.verdict is Verdict.NO_LONGER_SUPPORTED and before.lost in EFFICACY:
        return (
            f"Crossed again: the crossing lost at look {before.since} is not revived; new alpha was "
            "available because the fraction is above the highest one used, and the earlier bounds entered as "
            "they were used.",
        )
    return ()


def _judge_standing(plan: MonitoringPlan, before: Standing, found: Finding, z: float) -> Judged:
    """Judge a look that cannot spend: only what stands can be supported or lost."""
    if before.verdict in EFFICACY:
        return _support(plan, before, found, z)
    if before.verdict is Verdict.FUTILITY_CROSSED:
        if within_futility(plan, z, found.redrawn_futility):
            return before.verdict, (f"The futility crossing of look {before.since} is still supported.",)
        return Verdict.NO_LONGER_SUPPORTED, (
            f"Z is outside the redrawn futility bound; the futility crossing of look {before.since} is no "
            "longer supported.",
        )
    if before.verdict is Verdict.NO_LONGER_SUPPORTED and before.lost in EFFICACY:
        return before.verdict, _still_lost_remarks(plan, before, found, z)
    if found.finished and found.fraction >= 1.0 and before.verdict is not None:
        return Verdict.REACHED_WITHOUT_CROSSING, (
            "All alpha is spent: this look has no boundary, and the anytime-valid interval goes on.",
        )
    return Verdict.CANNOT_BE_JUDGED, ("No new alpha is available, so nothing new is judged.",)


def _support(plan: MonitoringPlan, before: Standing, found: Finding, z: float) -> Judged:
    """Compare a standing crossing with the redrawn boundary."""
    if before.verdict is not None and crossing(plan, z, found.redrawn) is before.verdict:
        return before.verdict, (
            f"The crossing of look {before.since} is still supported: Z is beyond the boundary redrawn at "
            "the present fraction.",
        )
    return Verdict.NO_LONGER_SUPPORTED, (
        f"Z is not beyond the boundary redrawn at the present fraction; the crossing of look {before.since} "
        "is no longer supported.",
    )


def _still_lost_remarks(plan: MonitoringPlan, before: Standing, found: Finding, z: float) -> tuple[str, ...]:
    """Say what would be needed for a lost crossing to cross again."""
    first = f"The crossing lost at look {before.since} is not brought back: no new alpha is available"
    if found.finished:
        first += ", because all of it is spent."
    else:
        first += f" until the fraction passes {found.highest:.4g}, the highest one used."
    if crossing(plan, z, found.redrawn) is not None:
        return (first, "Z is beyond the redrawn boundary, which alone does not make a crossing.")
    return (first,)
