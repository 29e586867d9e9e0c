"""What a version asks the panel to hear of: crossings, lost ones, notices, stale ratings."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from treering.notify import Event
from treering.store import Head
from treering.terms import CROSSED, EntryKind, EventClass, Verdict
from treering.update.versions import Analyses, Basis


def events_of(basis: Basis, analyses: Analyses, changes: Mapping[str, Any], head: Head) -> list[Event]:
    """Return the events of one version, in the order of the syntheses.

    Parameters
    ----------
    basis : Basis
        What the version is made from.
    analyses : mapping of str to dict
        Analysis bodies by synthesis id.
    changes : mapping of str to dict
        Changes by synthesis id.
    head : Head
        Head of the tree that the version names.

    Returns
    -------
    list of Event
    """
    events = []
    for synthesis, body in analyses.items():
        for kind in _classes(basis.previous.get(synthesis), body, basis):
            events.append(
                Event(
                    event=kind,
                    synthesis=synthesis,
                    version=basis.version,
                    date=basis.date,
                    body=body,
                    previous=basis.previous.get(synthesis),
                    changes=changes.get(synthesis, {}),
                    head_size=head.size,
                    head_root=head.root,
                    told_before=tuple(_told_before(basis, synthesis)),
                )
            )
    return events


def verdict_of(body: Mapping[str, Any] | None) -> Verdict | None:
    """Return the verdict of an analysis body, or None when the outcome is not monitored."""
    monitoring = (body or {}).get("monitoring")
    return Verdict(monitoring["look"]["verdict"]) if monitoring and monitoring["look"] else None


def _classes(
    before: Mapping[str, Any] | None, after: Mapping[str, Any], basis: Basis
) -> Iterable[EventClass]:
    was, now = verdict_of(before), verdict_of(after)
    if now in CROSSED and now is not was:
        yield EventClass.CROSSING
    elif now is Verdict.NO_LONGER_SUPPORTED and was is not now:
        yield EventClass.CROSSING_LOST
    trials = {row["trial"] for row in after["trials"]}
    if any(e.kind is EntryKind.INTEGRITY and e.body["trial"] in trials for e in basis.fresh):
        yield EventClass.INTEGRITY
    old, new = ((body or {}).get("certainty") for body in (before, after))
    if new and new["stale"] and not (old and old["stale"] and old["dated"] == new["dated"]):
        yield EventClass.CERTAINTY_STALE


def _told_before(basis: Basis, synthesis: str) -> Iterable[str]:
    """Yield who was told of the last crossing of `synthesis`."""
    told = [
        entry.body
        for entry in basis.state.live(EntryKind.NOTICE)
        if entry.body["synthesis"] == synthesis and entry.body["event"] == EventClass.CROSSING
    ]
    last = max((body["version"] for body in told), default=None)
    return sorted(body["person"] for body in told if body["version"] == last)
