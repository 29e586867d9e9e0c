"""Stored notices to people: each to each person once, and one that fails holds up no other."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from treering.errors import NoticeError
from treering.intake.view import StateView, StoredView
from treering.notify.build import ENVIRONMENT
from treering.notify.mail import Email
from treering.notify.message import Channel, Message
from treering.notify.outbox import FileOutbox
from treering.notify.web import AppriseService, Webhook
from treering.protocol import Delivery, Panel
from treering.records import NewEntry
from treering.terms import EntryKind


@dataclass(frozen=True)
class Sent:
    """What came of one notice: the delivery entry, or the sentence that says why there is none."""

    entry: NewEntry | None
    failure: str | None = None


@dataclass(frozen=True)
class Delivered:
    """What came of all pending notices."""

    entries: tuple[NewEntry, ...]
    failures: tuple[str, ...]


def pending(view: StateView) -> list[StoredView]:
    """Return the stored notices without a delivery, oldest first."""
    waiting = [n for n in view.live(EntryKind.NOTICE) if view.get(f"delivery/{n.key}") is None]
    return sorted(waiting, key=lambda notice: notice.seq)


def deliver(
    notice: StoredView,
    delivery: Delivery,
    outbox: Path,
    date: str,
    *,
    panel: Panel | None = None,
    environment: Mapping[str, str] | None = None,
    pause: float = 0.5,
) -> Sent:
    """Send one notice by its channel.

    Parameters
    ----------
    notice : stored entry
        The notice.
    delivery : Delivery
        Mail server and sender.
    outbox : Path
        Folder of the file channel.
    date : str
        ISO date of the run.
    panel : Panel, optional
        Where the full address of a webhook or apprise service stands; the store keeps none.
    environment : mapping, optional
        Where passwords and ``env:NAME`` addresses are looked up; the process's own by default.
    pause : float
        Seconds before the second attempt over the network.

    Returns
    -------
    Sent
        Never raises for a notice that can't go out; that is a failure in words, without secrets.
    """
    known = os.environ if environment is None else environment
    try:
        message = _message(notice, date, panel, known)
        detail = _channel(notice, delivery, outbox, known, pause).send(message)
    except NoticeError as error:
        return Sent(None, str(error))
    body = {
        "notice": notice.key,
        "person": notice.body["person"],
        "channel": notice.body["channel"],
        "detail": detail,
    }
    return Sent(NewEntry(EntryKind.DELIVERY, f"delivery/{notice.key}", body, true_at=date))


def deliver_pending(
    view: StateView,
    delivery: Delivery,
    outbox: Path,
    date: str,
    *,
    panel: Panel | None = None,
    environment: Mapping[str, str] | None = None,
    pause: float = 0.5,
    record: Callable[[NewEntry], None] | None = None,
) -> Delivered:
    """Send every notice that has no delivery yet.

    Parameters
    ----------
    view : StateView
        The state of the store.
    delivery, outbox, date, panel, environment, pause
        As in :func:`deliver`.
    record : callable, optional
        Called with each delivery entry at once, so that a run that is killed forgets none.

    Returns
    -------
    Delivered
    """
    entries, failures = [], []
    for notice in pending(view):
        sent = deliver(notice, delivery, outbox, date, panel=panel, environment=environment, pause=pause)
        if sent.entry is None:
            failures.append(str(sent.failure))
            continue
        entries.append(sent.entry)
        if record is not None:
            record(sent.entry)
    return Delivered(tuple(entries), tuple(failures))


def _message(notice: StoredView, date: str, panel: Panel | None, environment: Mapping[str, str]) -> Message:
    body = notice.body
    message = Message(notice.key, str(body["person"]), "", str(body["subject"]), str(body["text"]), date)
    address = _address(notice, panel, message)
    if address.startswith(ENVIRONMENT):
        name = address.removeprefix(ENVIRONMENT)
        if not environment.get(name):
            raise message.fails("its address is not set.", f"Set the environment variable {name}.")
        address = environment[name]
    return Message(message.key, message.person, address, message.subject, message.text, date)


def _address(notice: StoredView, panel: Panel | None, message: Message) -> str:
    """Return the full address; for services with tokens it stands in the panel file only."""
    stored = str(notice.body["address"])
    if notice.body["channel"] not in ("webhook", "apprise") or stored.startswith(ENVIRONMENT):
        return stored
    for member in panel.members if panel else ():
        if (member.id, member.channel) == (message.person, notice.body["channel"]):
            return member.address
    raise message.fails(
        "the panel file has no such address for this person any more.", "Restore it in config/panel.toml."
    )


def _channel(
    notice: StoredView,
    delivery: Delivery,
    outbox: Path,
    environment: Mapping[str, str],
    pause: float,
) -> Channel:
    channels: dict[str, Callable[[], Channel]] = {
        "file": lambda: FileOutbox(outbox),
        "email": lambda: Email(delivery, environment, pause),
        "webhook": lambda: Webhook(pause),
        "apprise": AppriseService,
    }
    return channels[str(notice.body["channel"])]()
