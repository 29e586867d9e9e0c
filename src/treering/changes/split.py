"""The movement of the pooled estimate, split by cause so that the parts add up to the whole.

The rows of the previous version are turned into those of the current one cause by cause, and the estimate is
taken again after each step. The size of a part depends on the order of the steps, so the same split in
reverse order is returned beside it: where both agree, the order does not matter.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from treering.changes.rows import Difference, Row
from treering.terms import Cause

#: Takes the rows that are in the main analysis; returns the pooled estimate on the analysis scale.
Repool = Callable[[Sequence[Row]], float | None]

ORDER: tuple[Cause | None, ...] = (*Cause, None)

#: Stored estimates are rounded to 10 significant digits, so a smaller gap is rounding.
ROUNDING = 1e-8


def split_movement(
    before: Mapping[str, Any],
    after: Mapping[str, Any],
    found: Sequence[Difference],
    repool: Repool,
    method_cause: Cause | None,
) -> list[dict[str, Any]]:
    """Split the movement of the pooled estimate by cause.

    Parameters
    ----------
    before, after : mapping
        Previous and current analysis body; both have a pooled estimate on the same scale.
    found : sequence of Difference
        The differences of the trial rows.
    repool : callable
        Pools rows by the current plan and code.
    method_cause : Cause or None
        What explains a movement on unchanged rows: an amendment, a software change, or nothing known.

    Returns
    -------
    list of dict
        ``cause`` (None when unknown), ``entries``, ``movement`` and ``movement_reversed`` on the analysis
        scale; the movements of each column add up to the whole.
    """
    method = _method_movement(before, after, repool, method_cause)
    forward = _walk(before, after, found, repool, method, ORDER)
    reverse = _walk(before, after, found, repool, method, tuple(reversed(ORDER)))
    parts = []
    for cause in ORDER:
        entries = sorted(
            {seq for d in found if d.explanation.cause is cause for seq in d.explanation.entries}
        )
        moved = cause in method or any(d.explanation.cause is cause for d in found)
        if moved:
            parts.append(
                {
                    "cause": None if cause is None else str(cause),
                    "entries": entries,
                    "movement": forward[cause],
                    "movement_reversed": reverse[cause],
                }
            )
    return parts


def _method_movement(
    before: Mapping[str, Any], after: Mapping[str, Any], repool: Repool, cause: Cause | None
) -> dict[Cause | None, float]:
    """Return what moves without any row changing, measured on the rows of the previous version.

    What the current method makes of the current rows must be the current estimate; a gap there has no
    cause and is returned under None.
    """
    moved: dict[Cause | None, float] = {}
    again = repool(_in_main(before["trials"]))
    if again is not None and not _near(again, before["pooled"]["estimate"]):
        moved[cause] = again - before["pooled"]["estimate"]
    now = repool(_in_main(after["trials"]))
    if now is None or not _near(now, after["pooled"]["estimate"]):
        moved[None] = moved.get(None, 0.0)
    return moved


def _walk(
    before: Mapping[str, Any],
    after: Mapping[str, Any],
    found: Sequence[Difference],
    repool: Repool,
    method: Mapping[Cause | None, float],
    order: Sequence[Cause | None],
) -> dict[Cause | None, float]:
    """Apply the differences cause by cause; what is left at the end goes to no cause."""
    rows: dict[str, Row] = {row["trial"]: row for row in before["trials"]}
    offset = -sum(method.values())
    estimate = float(before["pooled"]["estimate"])
    parts: dict[Cause | None, float] = {}
    for cause in order:
        rows = _apply(rows, [d for d in found if d.explanation.cause is cause])
        offset += method.get(cause, 0.0)
        pooled = repool(_in_main(list(rows.values())))
        # A state without an estimate on the way hands its movement on to the next step.
        reached = estimate if pooled is None else pooled + offset
        parts[cause] = reached - estimate
        estimate = reached
    rest = after["pooled"]["estimate"] - estimate
    if not _near(after["pooled"]["estimate"], estimate):
        parts[None] += rest
    else:
        _absorb_rounding(parts, rest)
    return parts


def _absorb_rounding(parts: dict[Cause | None, float], rest: float) -> None:
    """Give the rounding of the stored estimates to the largest part, so that the sum is exact."""
    largest = max(parts, key=lambda cause: abs(parts[cause]))
    if parts[largest] != 0.0:
        parts[largest] += rest


def _apply(rows: dict[str, Row], found: Sequence[Difference]) -> dict[str, Row]:
    rows = dict(rows)
    for difference in found:
        if difference.patch is None:
            rows.pop(difference.trial)
        else:
            rows[difference.trial] = {**rows.get(difference.trial, {}), **difference.patch}
    return rows


def _in_main(rows: Sequence[Row]) -> list[Row]:
    return sorted(
        (row for row in rows if row["in_main"]), key=lambda row: (row.get("published") or "", row["trial"])
    )


def _near(one: float, other: float) -> bool:
    return abs(one - other) <= ROUNDING * max(1.0, abs(one), abs(other))
