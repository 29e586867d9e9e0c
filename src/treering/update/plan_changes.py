"""The protocol in the store: its first text, and changes that an amendment must explain."""

from __future__ import annotations

from treering.errors import AmendmentError
from treering.protocol import Amendment
from treering.records import NewEntry
from treering.store import State
from treering.terms import Cause, EntryKind
from treering.update.context import Review

PROTOCOL_KEY = "protocol"


def protocol_entries(review: Review, state: State, day: str) -> list[NewEntry]:
    """Return the entries that record the protocol in force, its outcomes and its new amendments.

    Parameters
    ----------
    review : Review
        The review with config/review.toml as it stands.
    state : State
        The evidence store's state.
    day : str
        ISO date of the run.

    Returns
    -------
    list of NewEntry
        Empty when nothing changed.

    Raises
    ------
    AmendmentError
        When the plan differs from the stored one and no new amendment explains it, or when a recorded
        amendment is gone or altered.
    """
    stored = state.get(PROTOCOL_KEY)
    fresh = _new_amendments(review, state)
    digest = review.protocol.digest()
    if stored is not None and stored.body["digest"] != digest and not fresh:
        raise AmendmentError(
            "the plan changed, but no new amendment says so.",
            file=str(review.folder / "config" / "review.toml"),
            found=f"plan {digest[:12]}",
            expected=f"plan {str(stored.body['digest'])[:12]}, as stored on {stored.known_at[:10]}",
            next_step="Add an [[amendments]] entry (date, author, clauses, reason, results_seen), "
            "or put the old values back.",
        )
    if stored is not None and stored.body["text"] == review.protocol_text:
        return []
    plan_changed = stored is not None and stored.body["digest"] != digest
    text = NewEntry(
        EntryKind.PROTOCOL,
        PROTOCOL_KEY,
        {"digest": digest, "text": review.protocol_text},
        true_at=fresh[-1].date.isoformat() if fresh else day,
        cause=Cause.PROTOCOL if plan_changed else None,
        reason="; ".join(amendment.reason for amendment in fresh) or None,
        replaces=None if stored is None else stored.seq,
    )
    first = len(review.protocol.amendments) - len(fresh)
    amendments = [_amendment(item, first + i) for i, item in enumerate(fresh)]
    return [text, *amendments, *_outcome_entries(review, state, day)]


def _new_amendments(review: Review, state: State) -> tuple[Amendment, ...]:
    """Return the amendments that the store does not know; recorded ones must stand unchanged."""
    known = state.live(EntryKind.AMENDMENT)
    written = review.protocol.amendments
    for entry in known:
        number = int(entry.key.rsplit("/", 1)[1])
        if number >= len(written) or written[number].model_dump(mode="json") != entry.body:
            raise AmendmentError(
                f"amendment {number + 1} of {entry.body['date']} is gone or altered.",
                file=str(review.folder / "config" / "review.toml"),
                next_step="Put it back as it was; add a further amendment for a further change.",
            )
    return written[len(known) :]


def _amendment(item: Amendment, number: int) -> NewEntry:
    return NewEntry(
        EntryKind.AMENDMENT,
        f"amendment/{item.date.isoformat()}/{number}",
        item.model_dump(mode="json"),
        true_at=item.date.isoformat(),
        by=item.author,
        cause=Cause.PROTOCOL,
        reason=item.reason,
    )


def _outcome_entries(review: Review, state: State, day: str) -> list[NewEntry]:
    entries = []
    for outcome in review.protocol.outcomes:
        body = {
            "outcome": outcome.id,
            "title": outcome.title,
            "measure": outcome.measure.value,
            "better": outcome.better.value,
            "role": outcome.role.value,
            "unit": outcome.unit,
            "window": outcome.window,
        }
        stored = state.get(f"outcome/{outcome.id}")
        if stored is None or stored.body != body:
            entries.append(
                NewEntry(
                    EntryKind.OUTCOME,
                    f"outcome/{outcome.id}",
                    body,
                    true_at=day,
                    replaces=None if stored is None else stored.seq,
                )
            )
    return entries
