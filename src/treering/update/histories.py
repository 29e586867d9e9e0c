"""The past as rows: versions, entries, notices, and what differs between any two versions."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from treering.changes import compare
from treering.errors import StoreError
from treering.store import EvidenceStore, StoredEntry
from treering.synthesis import repool_rows
from treering.terms import EntryKind
from treering.update.events import verdict_of
from treering.update.versions import analyses_of, stored_protocol
from treering.update.views import version_body

#: Kinds of entries that hold results rather than evidence, and the parts of a body that name people.
PEOPLE_FIELDS = (
    "extractor",
    "adjudicator",
    "person",
    "seen_by",
    "by",
    "extractors",
    "assessors",
    "raters",
    "voters",
)


def version_rows(store: EvidenceStore) -> list[dict[str, Any]]:
    """Return one row per version, oldest first."""
    state = store.state()
    rows = []
    for body in store.versions():
        analyses = analyses_of(state, int(body["version"]))
        verdicts = [f"{name}: {verdict}" for name, a in analyses.items() if (verdict := verdict_of(a))]
        rows.append({**body, "verdicts": verdicts})
    return rows


def entry_rows(
    store: EvidenceStore,
    *,
    trial: str | None = None,
    person: str | None = None,
    outcome: str | None = None,
    since: str | None = None,
    until: str | None = None,
) -> list[dict[str, Any]]:
    """Return the entries that fit every filter given, in the order of the ledger."""
    return [
        {
            "seq": entry.seq,
            "known_at": entry.known_at,
            "true_at": entry.true_at,
            "kind": entry.kind.value,
            "key": entry.key,
            "by": entry.by,
            "cause": entry.cause,
            "reason": entry.reason,
            "replaces": entry.replaces,
            "hash": entry.hash,
        }
        for entry in store.entries()
        if (trial is None or entry.body.get("trial") == trial)
        and (outcome is None or outcome in (entry.body.get("outcome"), entry.body.get("synthesis")))
        and (person is None or person in people_of(entry))
        and (since is None or entry.known_at[:10] >= since)
        and (until is None or entry.known_at[:10] <= until)
    ]


def people_of(entry: StoredEntry) -> set[str]:
    """Return everyone whose work an entry records."""
    people = {entry.by}
    for name in PEOPLE_FIELDS:
        value = entry.body.get(name)
        people |= set(value) if isinstance(value, list) else {str(value)} if value else set()
    return people


def compare_versions(store: EvidenceStore, first: int, second: int) -> dict[str, Any]:
    """Say what differs between two versions: entries, estimates, verdicts, protocol, split by cause.

    Parameters
    ----------
    store : EvidenceStore
        The evidence store.
    first, second : int
        Numbers of the versions, the older first.

    Returns
    -------
    dict
        versions, entries (list of rows), protocol_changed, syntheses (what `changes.compare` gives).

    Raises
    ------
    StoreError
        When a version is not there, or they are out of order.
    """
    if first >= second:
        raise StoreError("name the older version first.", found=f"{first} {second}")
    before, after = version_body(store, first), version_body(store, second)
    old, new = store.state(version=first), store.state(version=second)
    protocol = stored_protocol(new)
    fresh = [entry for entry in new.everything() if entry.seq > int(before["entries"])]
    outcomes = {outcome.id: outcome for outcome in protocol.outcomes}
    syntheses = compare(
        analyses_of(old, first),
        analyses_of(new, second),
        fresh,
        (str(before["code_version"]), str(after["code_version"])),
        repool=lambda name, rows: repool_rows(outcomes[name], rows) if name in outcomes else None,
    )
    return {
        "versions": [first, second],
        "dates": [before["date"], after["date"]],
        "protocol_changed": before["protocol_digest"] != after["protocol_digest"],
        "entries": [
            {"seq": e.seq, "kind": e.kind.value, "key": e.key, "cause": e.cause, "reason": e.reason}
            for e in fresh
            if e.kind not in (EntryKind.LOOK, EntryKind.ANALYSIS, EntryKind.RUN, EntryKind.RELEASE)
        ],
        "syntheses": syntheses,
    }


def comparison_lines(found: dict[str, Any]) -> Iterator[str]:
    """Yield the comparison as lines for people."""
    pairs = zip(found["versions"], found["dates"], strict=True)
    yield " to ".join(f"version {number} of {date}" for number, date in pairs)
    changed = "changed" if found["protocol_changed"] else "unchanged"
    yield f"protocol: {changed}; new entries: {len(found['entries'])}"
    for name, change in found["syntheses"].items():
        verdict, estimate = change["verdict"], change["estimate"]
        yield f"{name}"
        if verdict["before"] or verdict["after"]:
            yield f"    verdict: {_movement(verdict['before'] or '-', verdict['after'] or '-')}"
        before, after = (_number(estimate[side]) for side in ("before", "after"))
        yield f"    estimate (analysis scale): {_movement(before, after)}"
        for part in change["split"]:
            yield f"    {part['cause'] or 'uncaused'}: {part['movement']:+.4g}"


def _movement(before: str, after: str) -> str:
    return f"{before}, as before" if before == after else f"{before} to {after}"


def _number(pooled: Any) -> str:
    value = pooled.get("estimate") if isinstance(pooled, dict) else pooled
    return "-" if value is None else f"{value:.4g}"


def notice_rows(store: EvidenceStore, *, waiting: bool = False) -> list[dict[str, Any]]:
    """Return one row per notice with its delivery and acknowledgement; with `waiting`, only open ones."""
    state = store.state()
    delivered = {entry.body["notice"]: entry.known_at for entry in state.all(EntryKind.DELIVERY)}
    seen = {entry.body["notice"]: entry.body["date"] for entry in state.live(EntryKind.ACKNOWLEDGEMENT)}
    rows = [
        {
            **{name: entry.body[name] for name in ("version", "event", "synthesis", "person", "channel")},
            "notice": entry.key,
            "delivered": delivered.get(entry.key),
            "acknowledged": seen.get(entry.key),
        }
        for entry in state.all(EntryKind.NOTICE)
    ]
    return [row for row in rows if not waiting or not (row["delivered"] and row["acknowledged"])]
