"""Nobody is counted twice: what each trial of a synthesis uses of its arms, held against what they have.

A trial stands in a synthesis once, whatever its number of arms: there is one verified result for a trial and
an outcome. A trial with more than two arms is entered with its eligible arms joined on each side (Cochrane
Handbook 5.1, section 16.5.4), and its record lists every joined arm with the number randomised. Two records
for two contrasts of one trial would count the shared arm twice: the intake refuses them by their report or
register number, and here the second one is left out with the reason.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import Any

import pandas as pd

from treering.effects import arm_ledger
from treering.synthesis.trials import SIDES, TrialRow

COUNTED_TWICE = "people counted twice"
WHOLE = "all arms"


def without_double_counting(rows: Sequence[TrialRow]) -> tuple[TrialRow, ...]:
    """Leave out, with the reason, each trial that would count someone twice.

    Parameters
    ----------
    rows : sequence of TrialRow
        Trials of one synthesis, in order; those that are left out already stay as they are.

    Returns
    -------
    tuple of TrialRow
    """
    seen: dict[str, str] = {}
    kept = []
    for row in rows:
        why = None if row.left_out is not None else _seen_before(row, seen) or _beyond_its_arms(row)
        if row.left_out is None and why is None:
            seen |= dict.fromkeys(_names(row), row.trial)
        kept.append(row if why is None else replace(row, status=COUNTED_TWICE, left_out=why))
    return tuple(kept)


def _names(row: TrialRow) -> list[str]:
    registered = [f"register number {row.registration.upper()}"] if row.registration else []
    return [*registered, *([f"report {row.report}"] if row.report else [])]


def _seen_before(row: TrialRow, seen: dict[str, str]) -> str | None:
    for name in _names(row):
        if name in seen:
            return (
                f"{name} is also that of trial {seen[name]}: one trial counts once; join the arms of each "
                "side in one record"
            )
    return None


def _beyond_its_arms(row: TrialRow) -> str | None:
    for use in _uses(row):
        if use["participants"] > use["randomised"]:
            return (
                f"{use['participants']:g} people are counted of {use['randomised']:g} randomised "
                f"({use['arm']}): nobody counts twice"
            )
    return None


def _uses(row: TrialRow) -> Iterator[dict[str, Any]]:
    """Yield what a trial uses of each joined side, or of the whole trial when no arm's size is known."""
    totals = {side: row.values.get(f"{side}_total") for side in SIDES}
    if any(total is None for total in totals.values()):
        return
    sizes = {side: [arm.randomised for arm in row.arms if arm.side == side] for side in SIDES}
    if all(known and None not in known for known in sizes.values()):
        for side in SIDES:
            name = " + ".join(arm.name for arm in row.arms if arm.side == side)
            yield _use(row, name, totals[side], sum(size or 0 for size in sizes[side]))
    elif row.randomised is not None:
        yield _use(row, WHOLE, sum(total or 0 for total in totals.values()), row.randomised)


def _use(row: TrialRow, arm: str, participants: float | None, randomised: int) -> dict[str, Any]:
    return {
        "trial": row.trial,
        "arm": arm,
        "participants": float(participants or 0),
        "randomised": randomised,
    }


def arms_body(rows: Sequence[TrialRow], synthesis: str) -> dict[str, Any]:
    """Prove that no arm is used beyond what it has, and say which trials could not be held against it.

    Parameters
    ----------
    rows : sequence of TrialRow
        Trials of one synthesis after `without_double_counting`.
    synthesis : str
        Its id.

    Returns
    -------
    dict
        ``checked`` (number of trials), ``passed`` (bool), ``uses`` (trial, arm, used, randomised, unused:
        the ledger that is the proof), ``not_checked`` and ``refused`` (trial, why).
    """
    main = [row for row in rows if row.left_out is None]
    uses = [use for row in main for use in _uses(row)]
    refused = [{"trial": r.trial, "why": r.left_out} for r in rows if r.status == COUNTED_TWICE]
    found = {use["trial"] for use in uses}
    return {
        "checked": len(found),
        "passed": not refused,
        "uses": _ledger(uses, synthesis),
        "not_checked": [{"trial": r.trial, "why": _unknown(r)} for r in main if r.trial not in found],
        "refused": refused,
    }


def _unknown(row: TrialRow) -> str:
    if any(row.values.get(f"{side}_total") is None for side in SIDES):
        return "the result gives no number of people for each side"
    return "nobody recorded how many were randomised"


def _ledger(uses: Sequence[dict[str, Any]], synthesis: str) -> list[dict[str, Any]]:
    if not uses:
        return []
    table = pd.DataFrame(uses)
    table.insert(0, "synthesis", synthesis)
    proof = arm_ledger(
        table[["synthesis", "trial", "arm", "participants"]], table[["trial", "arm", "randomised"]]
    )
    fields = ["trial", "arm", "used", "randomised", "unused"]
    return [dict(zip(fields, row, strict=True)) for row in proof[fields].itertuples(index=False)]
