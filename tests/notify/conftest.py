"""A panel, an event, stored notices in memory, and real servers on loopback."""

from __future__ import annotations

import json
import socket
import threading
from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import date
from http.server import BaseHTTPRequestHandler, HTTPServer
from typing import Any

import pytest
from aiosmtpd.controller import Controller

from treering.notify import Event
from treering.protocol import Interest, Member, Panel
from treering.records import NewEntry
from treering.terms import EntryKind, EventClass


@dataclass(frozen=True)
class Stored:
    seq: int
    entry: NewEntry

    def __getattr__(self, name: str) -> Any:
        return getattr(self.entry, name)


@dataclass
class State:
    """Entries by key, in the order in which they were put in."""

    entries: dict[str, Stored] = field(default_factory=dict)

    def put(self, *entries: NewEntry) -> None:
        for entry in entries:
            self.entries[entry.key] = Stored(len(self.entries), entry)

    def live(self, kind: EntryKind) -> list[Stored]:
        return sorted((e for e in self.entries.values() if e.kind is kind), key=lambda e: e.key)

    def get(self, key: str) -> Stored | None:
        return self.entries.get(key)


@pytest.fixture
def state() -> State:
    state = State()
    text = '[review]\ntitle = "Warm hands (invented)"\ninvented = true\ncomparator = "no warming"\n'
    state.put(NewEntry(EntryKind.PROTOCOL, "protocol", {"digest": "x", "text": text}, "2026-01-05"))
    return state


@pytest.fixture
def member():
    def make(person: str = "chair", **changes: Any) -> Member:
        return Member.model_validate({"id": person, "name": f"The {person} (invented)", **changes})

    return make


@pytest.fixture
def recusal() -> Interest:
    return Interest(
        date=date(2025, 11, 3), text="advises a maker of pads (invented)", outcomes=("pain",), recused=True
    )


@pytest.fixture
def panel(member, recusal) -> Panel:
    return Panel(
        format=1,
        members=(
            member("chair"),
            member("nurse", follows=("pain",)),
            member("other", follows=("skin-burns",)),
            member("maker", interests=(recusal,)),
        ),
    )


def _trial(name: str, **changes: Any) -> dict[str, Any]:
    return {
        "trial": name,
        "label": f"Trial {name}",
        "in_main": True,
        "left_out": None,
        "flags": [],
        **changes,
    }


@pytest.fixture
def event():
    """A crossing of an invented outcome; keywords change the event."""
    body = {
        "synthesis": "pain",
        "title": "Failed first attempt",
        "measure": "risk-ratio",
        "scale": "log",
        "unit": "",
        "participants": 2110,
        "pooled": {"estimate": -0.35667494393873245, "ci_low": -0.5108256237659907, "ci_high": -0.2, "k": 6},
        "absolute": {
            "per": 1000,
            "comparator_risk": 0.28,
            "difference": -84.0,
            "low": -112.0,
            "high": -50.75,
        },
        "trials": [_trial("A"), _trial("B")],
        "monitoring": {
            "plan": {"level": 0.95},
            "look": {"verdict": "benefit boundary crossed"},
            "rests_on": {
                "sentence": "Rests on B: without it the boundary is not crossed.",
                "tau2": 0,
                "tau2_lost": 0.0412,
                "null_participants": 1186,
            },
        },
    }

    def make(**changes: Any) -> Event:
        fields: dict[str, Any] = {
            "event": EventClass.CROSSING,
            "synthesis": "pain",
            "version": 4,
            "date": "2026-02-02",
            "body": body,
            "changes": {"causes": ["new trial"]},
            "head_size": 120,
            "head_root": "ab" * 32,
        }
        return Event(**{**fields, **changes})

    make.body = body
    make.trial = _trial
    return make


@dataclass
class Mailbox:
    """A mail server that answers with the given codes in turn, then takes what comes."""

    answers: list[str] = field(default_factory=list)
    mails: list[Any] = field(default_factory=list)
    port: int = 0

    async def handle_DATA(self, server: Any, session: Any, envelope: Any) -> str:
        if self.answers:
            return self.answers.pop(0)
        self.mails.append(envelope)
        return "250 taken"


@pytest.fixture
def mailbox() -> Iterator[Mailbox]:
    box = Mailbox()
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        box.port = probe.getsockname()[1]
    controller = Controller(box, hostname="127.0.0.1", port=box.port)
    controller.start()
    yield box
    controller.stop()


@dataclass
class Hook:
    """A web server that answers with the given statuses in turn, then 200, and keeps what was posted."""

    answers: list[int] = field(default_factory=list)
    posts: list[tuple[dict[str, str], dict[str, Any]]] = field(default_factory=list)
    url: str = ""


@pytest.fixture
def hook(monkeypatch) -> Iterator[Hook]:
    monkeypatch.setenv("NO_PROXY", "127.0.0.1")
    box = Hook()

    class Handler(BaseHTTPRequestHandler):
        def do_POST(self) -> None:
            content = self.rfile.read(int(self.headers["Content-Length"]))
            box.posts.append((dict(self.headers), json.loads(content)))
            self.send_response(box.answers.pop(0) if box.answers else 200)
            self.end_headers()

        def log_message(self, format: str, *args: Any) -> None:
            """Stay silent."""

    server = HTTPServer(("127.0.0.1", 0), Handler)
    box.url = f"http://127.0.0.1:{server.server_port}/hook?token=SECRET-TOKEN"
    thread = threading.Thread(target=server.serve_forever, args=(0.01,))
    thread.start()
    yield box
    server.shutdown()
    thread.join()
    server.server_close()
