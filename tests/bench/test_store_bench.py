"""Speed and size of the store against making the bytes and bare SQLite, in one run.

`TREERING_BENCH_ENTRIES` sets the number of entries: 1,000,000 is the size the store is built for, the default
keeps a normal run short. Times are processor seconds, so that other work on the machine counts little. The
entries are those of an invented review: per trial and outcome two extractions, a verification, a result and
a judgement among others.
"""

from __future__ import annotations

import json
import os
import sqlite3
import time
from collections.abc import Callable, Iterator
from hashlib import sha256
from pathlib import Path

import pytest

from treering import store
from treering.records import NewEntry
from treering.store.canonical import library_bytes
from treering.store.chain import check_links
from treering.store.entries import entry_value
from treering.terms import EntryKind

ENTRIES = int(os.environ.get("TREERING_BENCH_ENTRIES", "60000"))
BATCH = 10_000
MOMENT = "2026-05-04T06:00:00Z"
FIELDS = {
    "intervention_events": 12,
    "intervention_total": 120,
    "comparator_events": 21,
    "comparator_total": 118,
}

pytestmark = pytest.mark.bench


def trial_entries(number: int) -> list[NewEntry]:
    """Return the ten entries one trial brings."""
    trial, report, outcome = f"T{number}", f"R{number}", "failed first attempt"
    about = {"trial": trial, "outcome": outcome, "report": report}
    values = FIELDS | {"intervention_total": 100 + number % 50}
    locators = dict.fromkeys(FIELDS, "table 2, page 5")
    read = about | {"values": values, "locators": locators}
    origins = dict.fromkeys(FIELDS, "as printed")
    study = {
        "trial": trial,
        "title": f"Warming the hand before a drip is placed, invented trial {number}",
        "registration": f"INV{number:08d}",
        "randomised": 238,
        "design": "parallel",
        "year": 2021,
        "funding": "none declared",
        "interests": None,
    }
    document = {"report": report, "trial": trial, "form": "article", "citation": f"Invented journal {number}"}
    arm = {"trial": trial, "label": "warm pack for ten minutes", "randomised": 119}
    domains = ("randomisation", "deviations", "missing_data", "measurement", "selection")
    bodies = [
        (EntryKind.STUDY, f"study/{trial}", study),
        (EntryKind.REPORT, f"report/{report}", document | {"published": "2021-03-01", "identifier": None}),
        (EntryKind.ARM, f"arm/{trial}/warm", arm | {"arm": "warm", "side": "intervention"}),
        (EntryKind.ARM, f"arm/{trial}/usual", arm | {"arm": "usual", "side": "comparator"}),
        *(
            (
                EntryKind.EXTRACTION,
                f"extraction/{trial}/{outcome}/{person}",
                read | {"extractor": person, "origins": origins, "note": None, "correction": None},
            )
            for person in ("AB", "CD")
        ),
        (
            EntryKind.VERIFICATION,
            f"verification/{trial}/{outcome}",
            {
                "trial": trial,
                "outcome": outcome,
                "basis": "agreed",
                "extractors": ["AB", "CD"],
                "extractions": [10 * number + 4, 10 * number + 5],
                "fields": 4,
                "differences": [],
                "reread": False,
            },
        ),
        (
            EntryKind.RESULT,
            f"result/{trial}/{outcome}",
            read | {"verification": f"verification/{trial}/{outcome}", "subgroup": {}},
        ),
        (
            EntryKind.RISK_OF_BIAS,
            f"bias/{trial}/{outcome}",
            about | {"domains": dict.fromkeys(domains, "Low"), "overall": "Low", "assessors": ["EF", "GH"]},
        ),
        (
            EntryKind.SCREENING,
            f"screening/{report}",
            {"report": report, "trial": trial, "decision": "include", "voters": ["AB", "CD"]},
        ),
    ]
    return [NewEntry(kind, key, body, "2021-03-01", "AB") for kind, key, body in bodies]


def batches(entries: int) -> Iterator[list[NewEntry]]:
    """Yield the entries of the review, a batch at a time."""
    for start in range(0, entries, BATCH):
        stop = min(start + BATCH, entries)
        yield [entry for number in range(start // 10, stop // 10) for entry in trial_entries(number)]


class Clock:
    """Seconds spent in calls."""

    def __init__(self) -> None:
        self.seconds = 0.0

    def __call__(self, call: Callable[[], object]) -> None:
        start = time.process_time()
        call()
        self.seconds += time.process_time() - start


@pytest.fixture(scope="module")
def measured(tmp_path_factory: pytest.TempPathFactory) -> Iterator[dict[str, object]]:
    """A filled store, with the time its appends took and that of the bare work, batch by batch in turn."""
    folder = tmp_path_factory.mktemp("bench")
    bare = sqlite3.connect(folder / "bare.db", isolation_level=None)
    bare.execute("PRAGMA journal_mode=WAL")
    bare.execute("PRAGMA synchronous=FULL")
    bare.execute("CREATE TABLE entry (seq INTEGER PRIMARY KEY, canonical BLOB NOT NULL)")
    made = store.create(folder / "evidence.db", review="invented")
    append, bytes_and_inserts = Clock(), Clock()
    seq, size, previous = 0, 0, ""

    for batch in batches(ENTRIES):
        append(lambda batch=batch: made.append(batch, known_at=MOMENT))

        def work(batch: list[NewEntry] = batch) -> None:
            nonlocal seq, previous, size
            rows = []
            for entry in batch:
                value = entry_value(entry, seq=seq, known_at=MOMENT, previous=previous)
                rows.append((seq, library_bytes(value)))
                seq += 1
            bare.execute("BEGIN")
            bare.executemany("INSERT INTO entry VALUES (?, ?)", rows)
            bare.execute("COMMIT")
            previous = sha256(rows[-1][1]).hexdigest()
            size += sum(len(row[1]) for row in rows)

        bytes_and_inserts(work)
    bare.close()
    yield {
        "store": made,
        "append": append.seconds,
        "bare": bytes_and_inserts.seconds,
        "path": folder / "evidence.db",
    }
    made.close()


def test_append_takes_at_most_twice_the_bytes_and_bare_inserts(measured, record_property):
    ratio = measured["append"] / measured["bare"]
    record_property("append to bare", ratio)
    print(f"append {measured['append']:.1f} s, bare {measured['bare']:.1f} s, ratio {ratio:.2f}")
    assert ratio <= 2


def test_file_is_at_most_three_times_the_canonical_bytes(measured, record_property):
    evidence = measured["store"]
    canonical = sum(len(row[1]) for row in evidence.chain_rows())
    evidence.close()  # the log is folded into the file when the last connection closes
    path: Path = measured["path"]
    ratio = path.stat().st_size / canonical
    record_property("file to bytes", ratio)
    print(f"file {path.stat().st_size} bytes, canonical {canonical} bytes, ratio {ratio:.2f}")
    assert ratio <= 3


def test_links_are_checked_at_the_speed_of_hashing(measured, record_property):
    evidence = measured["store"]
    start = time.process_time()
    size, _ = check_links(evidence.chain_rows())
    rate = size / (time.process_time() - start)
    record_property("links a second", rate)
    print(f"{rate:.0f} links a second")
    rows = list(evidence.chain_rows(until=min(ENTRIES, 50_000)))
    start = time.process_time()
    for _, canonical, _ in rows:
        sha256(canonical).digest()
    hashing = len(rows) / (time.process_time() - start)
    assert rate >= hashing / 8


def test_state_of_any_version_is_read_in_a_second(tmp_path, record_property):
    """A review of 10,000 trials, scaled down with the entries."""
    trials = min(10_000, ENTRIES // 10)
    with store.create(tmp_path / "evidence.db", review="invented") as made:
        for number, batch in enumerate(batches(10 * trials), start=1):
            version = NewEntry(EntryKind.VERSION, f"version/{number}", {"version": number}, "2026-05-04")
            made.append([*batch, version], known_at=MOMENT)
        slowest = 0.0
        for body in made.versions():
            start = time.process_time()
            state = made.state(version=body["version"])
            results = state.live(EntryKind.RESULT)
            slowest = max(slowest, time.process_time() - start)
            assert len(results) == body["entries"] // 10
        start = time.process_time()
        values = sum(entry.body["values"]["intervention_total"] for entry in results)
        parsing = time.process_time() - start
    record_property("slowest state", slowest)
    print(f"{trials} trials: slowest state {slowest:.2f} s; reading the results' bodies {parsing:.2f} s")
    assert values > 0
    assert slowest < 1


def test_typed_tables_are_compared_with_the_bytes(measured, record_property):
    """The larger part of an audit: every column and typed row against the canonical bytes."""
    evidence = measured["store"]
    start = time.process_time()
    assert list(evidence.differences()) == []
    rate = ENTRIES / (time.process_time() - start)
    record_property("entries compared a second", rate)
    print(f"{rate:.0f} entries compared with their bytes a second")
    rows = list(evidence.chain_rows(until=min(ENTRIES, 50_000)))
    start = time.process_time()
    for _, canonical, _ in rows:
        json.loads(canonical)
    parsing = len(rows) / (time.process_time() - start)
    assert rate >= parsing / 12
