"""Events and panel to notices: who is told what, as entries for the store. Pure."""

from __future__ import annotations

import textwrap
import tomllib
from collections.abc import Iterable, Iterator, Mapping
from typing import Any
from urllib.parse import urlsplit

from treering.intake.view import StateView
from treering.notify import wording
from treering.notify.event import Event
from treering.protocol import Member, Panel
from treering.records import NewEntry
from treering.terms import CAUTION, EntryKind, EventClass

WIDTH = 100
ENVIRONMENT = "env:"
"""Start of an address that names an environment variable, which keeps the address itself out of files."""

INVENTED = "EVERYTHING IN THIS REVIEW IS INVENTED; nothing here says anything about care."


def build_notices(events: Iterable[Event], panel: Panel, view: StateView) -> list[NewEntry]:
    """Write the notices that a version calls for, one for each event and person.

    Parameters
    ----------
    events : iterable of Event
        What happened in the version.
    panel : Panel
        Who follows what, by which channel, with which declared interests.
    view : StateView
        The state of the store, for the review's name, certainty ratings and who was told before.

    Returns
    -------
    list of NewEntry
        Ordered by event, then person. A member whose declared interest recuses them gets a recusal text
        in place of the notice. Persons told of a crossing are told that it is lost, whatever they follow
        now, also when they have left the panel.
    """
    review = _review(view)
    return [
        _entry(event, member, review, view)
        for event in events
        for member in sorted(_recipients(event, panel, view), key=lambda member: member.id)
    ]


def _review(view: StateView) -> Mapping[str, Any]:
    """Return the head of the protocol that is in the store."""
    stored = view.get("protocol")
    head = tomllib.loads(stored.body["text"]).get("review", {}) if stored else {}
    return dict(head)


def _recipients(event: Event, panel: Panel, view: StateView) -> Iterator[Member]:
    """Yield the members to tell: who follows the outcome and the event, and who was told before."""
    told_before = set(event.told_before) if event.event is EventClass.CROSSING_LOST else set()
    for member in panel.members:
        follows = "all" in member.follows or event.synthesis in member.follows
        if (follows and event.event in member.events) or member.id in told_before:
            yield member
    for person in sorted(told_before - {member.id for member in panel.members}):
        yield _former(person, event, view)


def _former(person: str, event: Event, view: StateView) -> Member:
    """Return someone who has left the panel, reached as the earlier notice reached them.

    An address that was not kept (webhook, apprise) can't be used again; the file outbox holds the notice.
    """
    for notice in reversed(view.live(EntryKind.NOTICE)):
        body = notice.body
        if (body["person"], body["synthesis"], body["channel"]) == (person, event.synthesis, "email"):
            return Member(id=person, name=person, channel="email", address=body["address"])
    return Member(id=person, name=person)


def is_recused(member: Member, synthesis: str) -> bool:
    """Say whether a declared interest keeps a member from a matter; one without outcomes covers all."""
    return any(
        interest.recused and (not interest.outcomes or synthesis in interest.outcomes)
        for interest in member.interests
    )


def _entry(event: Event, member: Member, review: Mapping[str, Any], view: StateView) -> NewEntry:
    key = f"notice/{event.version}/{event.synthesis}/{event.slug}/{member.id}"
    recused = is_recused(member, event.synthesis)
    body = {
        "version": event.version,
        "synthesis": event.synthesis,
        "event": event.event.value,
        "person": member.id,
        "channel": member.channel,
        "address": stored_address(member.channel, member.address),
        "recused": recused,
        "subject": _subject(event, recused),
        "text": _text(event, member, key, review, view, recused=recused),
    }
    live = view.get(key)
    return NewEntry(EntryKind.NOTICE, key, body, true_at=event.date, replaces=live.seq if live else None)


def stored_address(channel: str, address: str) -> str:
    """Return the address as the store may keep it: without what could be a secret.

    The address of a webhook or of an apprise service often holds a token, so only its scheme and, for a
    webhook, its host are kept; the channel reads the rest from the panel file or the environment.
    """
    if channel not in ("webhook", "apprise") or address.startswith(ENVIRONMENT):
        return address
    parts = urlsplit(address)
    host = parts.hostname if channel == "webhook" else None
    return f"{parts.scheme}://{host or ''}\u2026"


def _subject(event: Event, recused: bool) -> str:
    what = f"recused: {event.event.value}" if recused else event.event.value
    return f"Version {event.version}: {what} ({event.title})"


def _text(
    event: Event,
    member: Member,
    key: str,
    review: Mapping[str, Any],
    view: StateView,
    *,
    recused: bool,
) -> str:
    title = " ".join(str(review.get("title") or "").split())
    head = [title] if title else []
    head += [INVENTED] if review.get("invented") else []
    head.append(f"To {member.name}. Outcome: {event.title}. Version {event.version} of {event.date}.")
    comparator = str(review.get("comparator") or "no intervention")
    parts = _recusal(event, member) if recused else _parts(event, view, comparator)
    parts = {**parts, "Store head": _head(event), "This notice": key}
    blocks = [_wrapped(line) for line in head]
    blocks += [f"{name}\n{_wrapped(text, '  ')}" for name, text in parts.items()]
    return "\n\n".join(blocks) + "\n"


def _announced(event: Event, view: StateView) -> str:
    """Say by which version's notices the crossing was announced."""
    told = [
        notice
        for notice in view.live(EntryKind.NOTICE)
        if notice.body["synthesis"] == event.synthesis
        and notice.body["event"] == EventClass.CROSSING
        and notice.body["version"] < event.version
    ]
    if not told:
        return "an earlier version"
    last = max(told, key=lambda notice: int(notice.body["version"]))
    return f"the notice of version {last.body['version']} ({last.true_at})"


def _parts(event: Event, view: StateView, comparator: str) -> dict[str, str]:
    """Return the parts of a notice by their heading."""
    rated = view.get(f"certainty/{event.synthesis}")
    parts = {
        "What happened": wording.happened(event, _announced(event, view)),
        "The ordinary pooled effect now": " ".join(wording.effect(event.body, without=comparator)),
        "What it rests on": wording.rested(event) or "",
        "Certainty": wording.certainty(rated.body if rated else None, event.version),
        "What this asks": wording.ASK,
        "How to read it": CAUTION,
    }
    return {name: text for name, text in parts.items() if text}


def _recusal(event: Event, member: Member) -> dict[str, str]:
    """Return the parts of the text for a recused member: that something is up, and no more."""
    interests = [
        f"{interest.text} (declared {interest.date.isoformat()})"
        for interest in member.interests
        if interest.recused and (not interest.outcomes or event.synthesis in interest.outcomes)
    ]
    return {
        "Why you get this": (
            f"The panel is being told of an event on this outcome: {event.event.value}. You are recused from "
            f"it because of a declared interest: {'; '.join(interests)}. You get no result and no request to "
            "meet; the chair decides how the panel meets without you."
        ),
        "What this asks": "Tell the chair if the declaration is out of date.",
    }


def _head(event: Event) -> str:
    return f"size {event.head_size}, root {event.head_root}" if event.head_root else "not stated"


def _wrapped(text: str, indent: str = "") -> str:
    return textwrap.fill(
        " ".join(text.split()),
        WIDTH,
        initial_indent=indent,
        subsequent_indent=indent,
        break_long_words=False,
        break_on_hyphens=False,
    )
