"""Lay down the review of the golden store; run as a program, print that store as SQL text.

The text in tests/assets/stores/revision-0001.sql was printed by the code of revision 0001 and is never
printed again: later code must open it as it is. The review is invented.
"""

from __future__ import annotations

import sqlite3
import sys
import tempfile
from pathlib import Path

from treering import store
from treering.records import NewEntry
from treering.store import EvidenceStore
from treering.terms import Cause, EntryKind

RUNS = ("2026-03-02T06:00:00Z", "2026-04-06T06:00:00Z", "2026-05-04T06:00:00Z")
BODIES = {
    EntryKind.RECEIPT: (
        "receipt/00ff",
        {"file": "T1-AB.xlsx", "sha256": "00ff", "size": 5120, "record": None},
    ),
    EntryKind.STUDY: (
        "study/T1",
        {"trial": "T1", "title": "Wärme vor der Kanüle \u2013 \U0001f9e4", "year": 2021},
    ),
    EntryKind.REPORT: ("report/R1", {"report": "R1", "trial": "T1", "form": "article"}),
    EntryKind.ARM: ("arm/T1/warm", {"trial": "T1", "arm": "warm", "side": "intervention", "randomised": 60}),
    EntryKind.OUTCOME: ("outcome/pain", {"outcome": "pain", "measure": "mean-difference", "better": "lower"}),
    EntryKind.EXTRACTION: (
        "extraction/T1/pain/AB",
        {
            "trial": "T1",
            "outcome": "pain",
            "extractor": "AB",
            "values": {"intervention_mean": 3.1, "intervention_sd": 1.0, "comparator_mean": 1e-7},
            "locators": {"intervention_mean": 'table 2, "pain"\n5 minutes'},
        },
    ),
    EntryKind.ADJUDICATION: (
        "adjudication/T1/pain",
        {"trial": "T1", "outcome": "pain", "adjudicator": "EF", "unresolved": False},
    ),
    EntryKind.VERIFICATION: ("verification/T1/pain", {"trial": "T1", "outcome": "pain", "fields": 6}),
    EntryKind.RESULT: (
        "result/T1/pain",
        {"trial": "T1", "outcome": "pain", "values": {"comparator_sd": 1.25}},
    ),
    EntryKind.WAIVER: ("waiver/T1/pain", {"trial": "T1", "outcome": "pain", "person": "GH", "reason": "x"}),
    EntryKind.RISK_OF_BIAS: ("bias/T1/pain", {"trial": "T1", "outcome": "pain", "overall": "Some concerns"}),
    EntryKind.CERTAINTY: ("certainty/pain", {"outcome": "pain", "rating": "low", "numbers": {"k": 3}}),
    EntryKind.INTEGRITY: ("integrity/T1/2026-03-01/erratum", {"trial": "T1", "notice": "erratum"}),
    EntryKind.SEARCH: ("search/register/2026-03-01", {"source": "register", "hits": 12, "error": None}),
    EntryKind.SCREENING: ("screening/R1", {"report": "R1", "decision": "include", "voters": ["AB", "CD"]}),
    EntryKind.ONGOING: ("ongoing/T9", {"trial": "T9", "planned": 400, "expected_end": "2027-03"}),
    EntryKind.PROTOCOL: ("protocol", {"digest": "ab" * 32, "text": "question = 'x'\n"}),
    EntryKind.AMENDMENT: ("amendment/2026-03-01/1", {"date": "2026-03-01", "results_seen": True}),
    EntryKind.LOOK: ("look/pain/1", {"synthesis": "pain", "number": 1, "fraction": 0.25, "z": -1.5}),
    EntryKind.ANALYSIS: (
        "analysis/pain/1",
        {"synthesis": "pain", "version": 1, "pooled": {"k": 1, "p": 0.125}},
    ),
    EntryKind.RELEASE: ("release/1", {"version": 1, "files": {"report.html": "cd" * 32}}),
    EntryKind.RUN: ("run/2026-03-02", {"as_of": "2026-03-02", "outcome": "version laid down"}),
    EntryKind.NOTICE: ("notice/1/pain/x/P1", {"version": 1, "event": "boundary crossed", "person": "P1"}),
    EntryKind.DELIVERY: ("delivery/notice/1/pain/x/P1", {"notice": "notice/1/pain/x/P1", "channel": "file"}),
    EntryKind.ACKNOWLEDGEMENT: (
        "acknowledgement/notice/1/pain/x/P1",
        {"notice": "notice/1/pain/x/P1", "person": "P1", "date": "2026-03-04"},
    ),
    EntryKind.PANEL_DECISION: ("decision/G1/2026-03-05", {"recommendation": "G1", "votes": {"for": 7}}),
    EntryKind.SIMULATION: (
        "simulation/pain",
        {"outcome": "pain", "plan_digest": "ef" * 32, "reviews": 1000, "seed": 7, "exceeds": False},
    ),
    EntryKind.DEFECT: ("defect/1", {"id": "1", "description": "invented", "versions": [1]}),
}


def lay_down(made: EvidenceStore) -> None:
    """Lay down an entry of every kind, a correction, a withdrawal and two versions, in three runs."""
    entries = [NewEntry(kind, key, body, "2026-03-01", "AB") for kind, (key, body) in BODIES.items()]
    first = NewEntry(EntryKind.VERSION, "version/1", {"version": 1, "causes": ["new trial"]}, "2026-03-02")
    made.append([*entries, first], known_at=RUNS[0])
    key, body = BODIES[EntryKind.STUDY]
    seq = list(BODIES).index(EntryKind.STUDY)
    corrected = NewEntry(
        EntryKind.STUDY, key, body | {"year": 2020}, "2026-04-01", "CD", Cause.CORRECTION, "year misread", seq
    )
    gone = NewEntry(
        EntryKind.WITHDRAWAL,
        "waiver/T1/pain",
        {"reason": "two people have read it now"},
        "2026-04-02",
        "CD",
        replaces=list(BODIES).index(EntryKind.WAIVER),
    )
    made.append([corrected, gone], known_at=RUNS[1])
    second = NewEntry(EntryKind.VERSION, "version/2", {"version": 2, "causes": ["correction"]}, "2026-05-04")
    made.append([second], known_at=RUNS[2])


def main() -> None:
    """Print the store as SQL."""
    path = Path(tempfile.mkdtemp()) / "golden.db"
    with store.create(path, review="invented golden review") as made:
        lay_down(made)
    connection = sqlite3.connect(path)
    sys.stdout.writelines(f"{line}\n" for line in connection.iterdump())


if __name__ == "__main__":
    main()
