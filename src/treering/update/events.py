"""What a version asks the panel to hear of: crossings, lost ones, notices, stale ratings."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from datetime import date
from typing import Any

from treering.notify import Event
from treering.report.certainty import with_staleness
from treering.store import Head
from treering.terms import CROSSED, EntryKind, EventClass, NoticeKind, Verdict
from treering.update.versions import Analyses, Basis
from treering.update.views import rated


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
    elif _noticed(after, basis):
        yield EventClass.INTEGRITY
    elif _stale(after, basis) and not _told_stale(after["synthesis"], basis):
        yield EventClass.CERTAINTY_STALE  # every other notice carries the age of the rating itself


def _noticed(body: Mapping[str, Any], basis: Basis) -> bool:
    """Say whether a notice that bears on trust came in; an erratum is a correction like any other."""
    trials = {row["trial"] for row in body["trials"]}
    return any(
        entry.kind is EntryKind.INTEGRITY
        and entry.body["trial"] in trials
        and entry.body["notice"] != NoticeKind.ERRATUM
        for entry in basis.fresh
    )


def _stale(body: Mapping[str, Any], basis: Basis) -> bool:
    """Say whether the certainty rating of an outcome is older than its numbers now."""
    name = body["synthesis"]
    day = date.fromisoformat(basis.date)
    judgements = [judgement for judgement in rated(basis.state) if judgement["outcome"] == name]
    reread = basis.protocol.living.certainty_reread_days
    return any(j["stale"] for j in with_staleness(judgements, {name: body}, day=day, reread_days=reread))


def _told_stale(synthesis: str, basis: Basis) -> bool:
    """Say whether people were told since the rating was laid down: once for each rating is enough."""
    rating = basis.state.get(f"certainty/{synthesis}")
    return rating is not None and any(
        notice.seq > rating.seq
        for notice in basis.state.live(EntryKind.NOTICE)
        if notice.body["synthesis"] == synthesis and notice.body["event"] == EventClass.CERTAINTY_STALE
    )


def _told_before(basis: Basis, synthesis: str) -> Iterable[str]:
    """Yield who was told of the last crossing of `synthesis`."""
    told = [
        entry.body
        for entry in basis.state.live(EntryKind.NOTICE)
        if entry.body["synthesis"] == synthesis and entry.body["event"] == EventClass.CROSSING
    ]
    last = max((body["version"] for body in told), default=None)
    return sorted(body["person"] for body in told if body["version"] == last)
