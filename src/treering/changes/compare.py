"""Compare two versions: what changed in each synthesis, by which cause, and by how much it moved."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from treering.changes.entries import Entry, Explanation, cause_of
from treering.changes.rows import Difference, Finder, Row, differences
from treering.changes.split import ROUNDING, split_movement
from treering.errors import AnalysisError
from treering.terms import Cause, EntryKind

Body = Mapping[str, Any]

#: Fields of an analysis body that only an amendment or new code can change.
PLAN_FIELDS = ("title", "measure", "scale", "role", "better", "unit", "mid", "comparator_risk", "question")


def compare(
    previous: Mapping[str, Body] | None,
    current: Mapping[str, Body],
    entries: Sequence[Entry],
    code_versions: tuple[str | None, str],
    *,
    repool: Callable[[str, Sequence[Row]], float | None],
) -> dict[str, dict[str, Any]]:
    """Say what differs between two versions, synthesis by synthesis.

    Parameters
    ----------
    previous : mapping or None
        Analysis bodies of the previous version by synthesis id; None for the base version.
    current : mapping
        Analysis bodies of the current version.
    entries : sequence of Entry
        Every entry stored since the previous version.
    code_versions : tuple
        Code version of the previous version (None for the base version) and of the current one.
    repool : callable
        ``repool(synthesis, rows)`` pools the rows of the main analysis by the current plan and returns the
        estimate on the analysis scale, or None when it can't be estimated.

    Returns
    -------
    dict
        Per synthesis: ``causes``, ``trials_added``, ``trials_changed``, ``trials_removed``, ``plan_changed``,
        ``estimate`` and ``verdict`` (before and after), ``movement`` and its ``split``, ``order_effect`` and
        ``uncaused``. Numbers are on the analysis scale.

    Raises
    ------
    AnalysisError
        When an entry carries a cause that is not in :class:`treering.terms.Cause`.
    """
    _check_causes(entries)
    before = previous or {}
    known = {row["trial"] for body in before.values() for row in body["trials"]}
    method = _method(entries, code_versions)
    find = Finder(entries, known, method)
    ids = [*current, *(name for name in before if name not in current)]
    return {name: _one(name, before.get(name), current.get(name), find, repool) for name in ids}


def _check_causes(entries: Sequence[Entry]) -> None:
    words = {str(cause) for cause in Cause}
    for entry in entries:
        if entry.cause is not None and str(entry.cause) not in words:
            raise AnalysisError(
                f"Entry {entry.seq} of the store names a cause that is not known.",
                found=entry.cause,
                expected=", ".join(sorted(words)),
            )


def _method(entries: Sequence[Entry], code_versions: tuple[str | None, str]) -> Explanation:
    """Return what explains a change that no entry about a trial explains."""
    amended = [e for e in entries if e.kind in (EntryKind.PROTOCOL, EntryKind.AMENDMENT)]
    before, now = code_versions
    if before is not None and amended:
        reason = next((r for e in amended if (r := e.reason or e.body.get("reason"))), None)
        return Explanation(Cause.PROTOCOL, reason, tuple(e.seq for e in amended))
    if before is not None and before != now:
        return Explanation(Cause.SOFTWARE, f"code version {before} became {now}", ())
    return Explanation(None, None, ())


def _one(
    name: str,
    before: Body | None,
    after: Body | None,
    find: Finder,
    repool: Callable[[str, Sequence[Row]], float | None],
) -> dict[str, Any]:
    found = differences(_rows(before), _rows(after), name, find)
    plan = _plan_changes(before, after, find.fallback)
    split, note = _split(name, before, after, found, find, repool)
    judged = [e for e in find.entries if e.kind == EntryKind.CERTAINTY and e.body.get("outcome") == name]
    result: dict[str, Any] = {
        **_listed(before, after, found),
        "plan_changed": plan,
        "certainty_entries": [e.seq for e in judged],
        "estimate": {"before": _pooled(before), "after": _pooled(after)},
        "verdict": {"before": _verdict(before), "after": _verdict(after)},
        "movement": _movement(before, after),
        "split": split,
        "split_note": note,
        "order_effect": max((abs(p["movement"] - p["movement_reversed"]) for p in split), default=None),
    }
    present = {d.explanation.cause for d in found} | {
        Cause(p["cause"]) for p in [*split, *plan] if p["cause"]
    }
    present |= {cause_of(e) for e in judged}
    result["causes"] = [str(cause) for cause in Cause if cause in present]
    result["uncaused"] = _uncaused(result, found)
    return result


def _rows(body: Body | None) -> Sequence[Row] | None:
    return None if body is None else list(body["trials"])


def _listed(before: Body | None, after: Body | None, found: Sequence[Difference]) -> dict[str, Any]:
    """Return the differences as the three lists of the report."""
    rows = {row["trial"]: row for body in (before, after) if body for row in body["trials"]}
    lists: dict[str, list[dict[str, Any]]] = {"trials_added": [], "trials_changed": [], "trials_removed": []}
    for d in found:
        row = rows[d.trial]
        head = {"trial": d.trial, "label": row.get("label")}
        tail = {"cause": d.explanation.cause and str(d.explanation.cause), "reason": d.explanation.reason}
        if d.group == "added":
            lists["trials_added"].append(
                {**head, "in_main": row["in_main"], "left_out": row.get("left_out"), **tail}
            )
        elif d.group == "removed" or (d.group == "membership" and not row["in_main"]):
            left = "no longer among the trials" if d.group == "removed" else row.get("left_out")
            lists["trials_removed"].append({**head, "left_out": left, **tail})
        if d.group not in ("added", "removed"):
            lists["trials_changed"] += [
                {**head, "field": name, "before": was, "after": now, **tail} for name, was, now in d.fields
            ]
    return lists


def _plan_changes(before: Body | None, after: Body | None, method: Explanation) -> list[dict[str, Any]]:
    if before is None or after is None:
        return []
    pooled = bool(before.get("pooled") and after.get("pooled"))  # without an estimate no method is named
    was, now = _plan(before, pooled=pooled), _plan(after, pooled=pooled)
    return [
        {
            "field": name,
            "before": was.get(name),
            "after": now.get(name),
            "cause": method.cause and str(method.cause),
            "reason": method.reason,
        }
        for name in (*now, *(name for name in was if name not in now))
        if was.get(name) != now.get(name)
    ]


def _plan(body: Body, *, pooled: bool) -> dict[str, Any]:
    """Return what the protocol lays down for a synthesis: definition, method, monitoring."""
    fields = {name: body.get(name) for name in PLAN_FIELDS}
    if pooled:
        fields["method"] = body["pooled"].get("method")
    plan = (body.get("monitoring") or {}).get("plan") or {}
    return fields | {f"monitoring {name}": value for name, value in plan.items()}


def _split(
    name: str,
    before: Body | None,
    after: Body | None,
    found: Sequence[Difference],
    find: Finder,
    repool: Callable[[str, Sequence[Row]], float | None],
) -> tuple[list[dict[str, Any]], str | None]:
    """Return the split, or the reason why there is none."""
    if before is None or after is None:
        return (
            [],
            "There is no earlier estimate to move from." if before is None else "The synthesis was ended.",
        )
    if _pooled(before) is None or _pooled(after) is None:
        return [], "One of the two versions has no pooled estimate."
    if before["measure"] != after["measure"]:
        return [], "The effect measure changed, so the two estimates are not on one scale."
    parts = split_movement(before, after, found, lambda rows: repool(name, rows), find.fallback.cause)
    return parts, None


def _pooled(body: Body | None) -> dict[str, float | None] | None:
    pooled = (body or {}).get("pooled")
    if not pooled or pooled.get("estimate") is None:
        return None
    return {key: pooled.get(key) for key in ("estimate", "ci_low", "ci_high")}


def _verdict(body: Body | None) -> str | None:
    monitoring = (body or {}).get("monitoring")
    return monitoring["look"]["verdict"] if monitoring and monitoring.get("look") else None


def _movement(before: Body | None, after: Body | None) -> float | None:
    was, now = _pooled(before), _pooled(after)
    if was is None or now is None or before is None or after is None or before["measure"] != after["measure"]:
        return None
    return float(now["estimate"] or 0.0) - float(was["estimate"] or 0.0)


def _uncaused(result: Mapping[str, Any], found: Sequence[Difference]) -> list[dict[str, Any]]:
    """List every change without a cause; a report with one of these must not be signed."""
    listed = [
        {"what": f"trial {d.trial}", "detail": ", ".join(n for n, _, _ in d.fields) or d.group}
        for d in found
        if d.explanation.cause is None
    ]
    listed += [{"what": p["field"], "detail": "plan field"} for p in result["plan_changed"] if not p["cause"]]
    listed += [
        {"what": "pooled estimate", "detail": f"moved by {p['movement']:.6g}"}
        for p in result["split"]
        if p["cause"] is None and abs(p["movement"]) > ROUNDING
    ]
    for what in ("estimate", "verdict"):
        pair = result[what]
        if (
            pair["before"] is not None
            and pair["before"] != pair["after"]
            and not result["causes"]
            and not listed
        ):
            listed.append({"what": what, "detail": f"{pair['before']} became {pair['after']}"})
    return listed
