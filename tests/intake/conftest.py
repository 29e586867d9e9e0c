"""A ledger in memory that keeps the store's rules, and short ways to drop files before it."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from treering import intake
from treering.intake import Dropped
from treering.protocol import Protocol, read_protocol
from treering.records import NewEntry
from treering.terms import Cause, EntryKind

ASSETS = Path(__file__).parent.parent / "assets" / "intake"
CONFIG = Path(__file__).parent.parent.parent / "config" / "review.toml"


@dataclass(frozen=True)
class Stored:
    seq: int
    kind: EntryKind
    key: str
    body: dict[str, Any]
    true_at: str
    known_at: str
    by: str
    cause: Cause | None
    reason: str | None
    replaces: int | None


@dataclass
class Ledger:
    """One live entry a key; equal entries are skipped; a live key must be named in `replaces`."""

    entries: list[Stored] = field(default_factory=list)
    live_keys: dict[str, Stored] = field(default_factory=dict)

    def append(self, new: list[NewEntry] | tuple[NewEntry, ...], known_at: str) -> list[Stored]:
        added = []
        for entry in new:
            live = self.live_keys.get(entry.key)
            same = live is not None and (live.kind, live.body, live.true_at, live.by) == (
                entry.kind,
                dict(entry.body),
                entry.true_at,
                entry.by,
            )
            if same:
                continue
            assert entry.replaces == (live.seq if live else None), entry.key
            stored = Stored(
                len(self.entries),
                entry.kind,
                entry.key,
                dict(entry.body),
                entry.true_at,
                known_at + "T06:00:00Z",
                entry.by,
                entry.cause,
                entry.reason,
                entry.replaces,
            )
            self.entries.append(stored)
            added.append(stored)
            if entry.kind is EntryKind.WITHDRAWAL:
                del self.live_keys[entry.key]
            else:
                self.live_keys[entry.key] = stored
        return added

    def live(self, kind: EntryKind) -> list[Stored]:
        return sorted((e for e in self.live_keys.values() if e.kind is kind), key=lambda e: e.key)

    def get(self, key: str) -> Stored | None:
        return self.live_keys.get(key)

    def all(self, kind: EntryKind) -> list[Stored]:
        return [entry for entry in self.entries if entry.kind is kind]


@dataclass
class Review:
    """A review in memory: drop files, run the intake's share of an update."""

    protocol: Protocol
    ledger: Ledger = field(default_factory=Ledger)
    checked: intake.Checked | None = None
    settled: intake.Settled | None = None

    def check(self, files: dict[str, str | bytes], known: str = "2026-01-05") -> intake.Checked:
        dropped = [
            Dropped.of(name, text.encode() if isinstance(text, str) else text)
            for name, text in sorted(files.items())
        ]
        return intake.check(intake.read_records(dropped), self.protocol, self.ledger, known_date=known)

    def update(self, files: dict[str, str | bytes], known: str = "2026-01-05") -> intake.Settled:
        self.checked = self.check(files, known)
        new = intake.entries_for(self.checked, self.protocol, self.ledger, known)
        self.ledger.append(new, known)
        self.settled = intake.settle(self.ledger, self.protocol)
        self.ledger.append(self.settled.entries, known)
        return self.settled

    def faults(self, files: dict[str, str | bytes], known: str = "2026-01-05") -> list[str]:
        return [str(fault) for fault in self.check(files, known).faults]

    def result(self, trial: str, outcome: str) -> Stored | None:
        return self.ledger.get(f"result/{trial}/{outcome}")

    def people(self, **changes: Any) -> None:
        """Change the own trials or roles of people: people(MV={"own_trials": ("HW-01",)})."""
        changed = tuple(p.model_copy(update=changes.get(p.id, {})) for p in self.protocol.people)
        self.protocol = self.protocol.model_copy(update={"people": changed})

    def verification(self, **changes: Any) -> None:
        rule = self.protocol.verification.model_copy(update=changes)
        self.protocol = self.protocol.model_copy(update={"verification": rule})


@pytest.fixture(scope="session")
def demo_protocol() -> Protocol:
    """The invented hand-warming review that ships in config/."""
    return read_protocol(CONFIG)


@pytest.fixture
def review(demo_protocol: Protocol) -> Review:
    return Review(demo_protocol)


@pytest.fixture
def asset():
    """Read one file of tests/assets/intake as bytes."""
    return lambda name: (ASSETS / name).read_bytes()


@pytest.fixture
def reading():
    """Write an extraction of the invented trial HW-01 as TOML; keywords change single lines."""

    def write(who: str = "MV", outcome: str = "failed-first-attempt", **changes: Any) -> str:
        head = {
            "record": "extraction",
            "trial": "HW-01",
            "title": "An invented trial of warm hands",
            "published": "2025-03-14",
            "randomised": 240,
            "extractor": who,
        }
        values: dict[str, Any] = {
            "intervention_events": 24,
            "intervention_total": 120,
            "comparator_events": 36,
            "comparator_total": 119,
        }
        report = {"id": changes.pop("report", "HW-01-a"), "form": "article", "citation": "Invented, 2025"}
        subgroups = changes.pop("subgroups", {"setting": "ward"})
        result: dict[str, Any] = {"outcome": outcome, **changes.pop("values", values), "locator": "table 2"}
        for name, value in changes.items():
            (head if name in _HEAD else result)[name] = value
        text = _lines({name: value for name, value in head.items() if value is not None})
        text += "[report]\n" + _lines(report)
        text += "[subgroups]\n" + _lines(subgroups) if subgroups else ""
        return text + "[[results]]\n" + _lines({n: v for n, v in result.items() if v is not None})

    return write


_HEAD = {
    "trial",
    "title",
    "registration",
    "published",
    "year",
    "randomised",
    "design",
    "correction",
    "third_reading",
    "arms",
}


def _lines(fields: dict[str, Any]) -> str:
    return "".join(f"{name} = {_toml(value)}\n" for name, value in fields.items())


def _toml(value: Any) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_toml(item) for item in value) + "]"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{name} = {_toml(item)}" for name, item in value.items()) + "}"
    text = str(value).replace("\\", "\\\\").replace('"', '\\"')
    return f'"{text}"'


@pytest.fixture
def adjudication():
    """Write an adjudication of HW-01 by TR as TOML."""

    def write(**changes: Any) -> str:
        fields = {
            "record": "adjudication",
            "trial": "HW-01",
            "outcome": "failed-first-attempt",
            "adjudicator": "TR",
            "values": {"intervention_events": 24},
            "locator": "table 2, row 1",
            "reason_class": "slip",
            "reason": "the other number stands in the row below",
            **changes,
        }
        return _lines({name: value for name, value in fields.items() if value is not None})

    return write
