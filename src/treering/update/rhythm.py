"""Whether the weekly update keeps its rhythm: when it ran, when it is due, and whether a run was missed."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import date, timedelta
from typing import Any

from treering.store import State
from treering.terms import EntryKind


def rhythm(state: State, today: str, every: int) -> dict[str, Any]:
    """Say when the update ran last and whether it is overdue or came late.

    A run that is missed leaves nothing behind, so it shows as a day that has passed: `next_due` is printed in
    advance, and the run that catches up bears its own date.

    Parameters
    ----------
    state : State
        Everything in the store.
    today : str
        ISO date of the day asked.
    every : int
        Days between updates, from the protocol.

    Returns
    -------
    dict
        ``last_run``, ``run_before`` and ``next_due`` (ISO dates or None), ``days_since_run`` (to today),
        ``days_between`` (of the last two runs), ``overdue`` and ``late`` (bool: more than `every` days).
    """
    days = sorted({date.fromisoformat(e.body["as_of"][:10]) for e in state.live(EntryKind.RUN)})
    last, before = (days[-1] if days else None), (days[-2] if len(days) > 1 else None)
    since = None if last is None else (date.fromisoformat(today) - last).days
    between = None if last is None or before is None else (last - before).days
    return {
        "last_run": None if last is None else last.isoformat(),
        "run_before": None if before is None else before.isoformat(),
        "next_due": None if last is None else (last + timedelta(days=every)).isoformat(),
        "days_since_run": since,
        "days_between": between,
        "every": every,
        "overdue": since is not None and since > every,
        "late": between is not None and between > every,
    }


def rhythm_words(found: Mapping[str, Any]) -> Iterator[str]:
    """Yield the parts of the status line that `rhythm` calls for."""
    if found["overdue"]:
        yield f"overdue: no run for {found['days_since_run']} days"
    if found["late"]:
        yield f"the run before was {found['days_between']} days earlier: a run was missed or came late"
    if found["next_due"]:
        yield f"the next run is due on {found['next_due']}"
