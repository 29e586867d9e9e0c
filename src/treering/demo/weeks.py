"""The invented weeks of the demo: what is dropped on which day."""

from __future__ import annotations

from dataclasses import dataclass

from treering.demo.files import DemoFile, as_json, as_toml, both, extraction, searches
from treering.demo.trials import (
    ALDER,
    BIRCH,
    CEDAR,
    CEDAR_CORRECTED_FAILURES,
    DOGWOOD,
    ELM,
    FIR,
    GORSE,
    HAZEL,
    InventedTrial,
)


@dataclass(frozen=True)
class Week:
    """One weekly update: its day, what it shows, and the files dropped before it."""

    day: str
    story: str
    files: tuple[DemoFile, ...]


def weeks() -> tuple[Week, ...]:
    """Return the invented weeks in order."""
    return (
        Week("2026-01-05", "base version: four trials, read by two people apart", _base("2026-01-05")),
        Week("2026-01-12", "a quiet week: searched, nothing new", (searches("2026-01-12", 14, 0),)),
        Week("2026-01-19", "two new trials; a third person settles one difference", _two_new("2026-01-19")),
        Week("2026-01-26", "an erratum corrects one number; certainty is rated", _correction("2026-01-26")),
        Week("2026-02-02", "the large Gorse trial", _one_new(GORSE, "2026-02-02")),
        Week("2026-02-09", "the report of the Gorse trial is retracted", _retraction("2026-02-09")),
        Week("2026-02-16", "the large Hazel trial reports", _one_new(HAZEL, "2026-02-16")),
    )


def _base(day: str) -> tuple[DemoFile, ...]:
    files = [file for trial in (ALDER, BIRCH, CEDAR, DOGWOOD) for file in both(trial, day)]
    ongoing = {
        "record": "ongoing trial",
        "trial": "Hazel",
        "registration": "INVENTED-0008",
        "planned": 860,
        "expected_end": "2026-01-31",
        "status": "recruiting",
        "outcomes": ["failed-first-attempt", "pain", "skin-burns"],
        "by": "IN",
        "date": day,
    }
    return (*files, as_toml("hazel-ongoing.toml", ongoing), searches(day, 41, 6))


def _two_new(day: str) -> tuple[DemoFile, ...]:
    settled = {
        "record": "adjudication",
        "trial": "Fir",
        "outcome": "failed-first-attempt",
        "adjudicator": "TR",
        "values": {"comparator_events": FIR.failed[2]},
        "locator": "table 2, second column",
        "reason_class": "slip",
        "reason": "one reader took the number from the line above",
    }
    misread = both(FIR, day, comparator_events=FIR.failed[2] - 3)
    return (*both(ELM, day), *misread, as_toml("fir-settled.toml", settled), searches(day, 17, 2))


def _correction(day: str) -> tuple[DemoFile, ...]:
    why = "erratum to table 2 (invented)"
    files = []
    for person in ("MV", "OK"):
        record = extraction(CEDAR, person, comparator_events=CEDAR_CORRECTED_FAILURES)
        record |= {"correction": why, "results": record["results"][:1]}
        files.append(as_toml(f"cedar-correction-{person}.toml", record))
    erratum = {
        "record": "integrity notice",
        "trial": "Cedar",
        "report": "Cedar-main",
        "notice": "erratum",
        "date": "2026-01-23",
        "link": "https://example.org/invented-erratum",
        "reason": "the journal corrected one count in table 2 (invented)",
        "seen_by": "IN",
    }
    certainty = {
        "record": "certainty judgement",
        "outcome": "failed-first-attempt",
        "rating": "Moderate",
        "reasons": {"imprecision": "the interval reaches effects too small to matter (invented)"},
        "raters": ["TR", "SL"],
        "version": 2,
        "date": "2026-01-24",
    }
    papers = (as_toml("cedar-erratum.toml", erratum), as_toml("certainty-failed.toml", certainty))
    return (*files, *papers, searches(day, 12, 0))


def _one_new(trial: InventedTrial, day: str) -> tuple[DemoFile, ...]:
    return (*both(trial, day), searches(day, 15, 1))


def _retraction(day: str) -> tuple[DemoFile, ...]:
    notice = {
        "record": "integrity notice",
        "trial": "Gorse",
        "report": "Gorse-main",
        "notice": "retraction",
        "date": "2026-02-06",
        "link": "https://example.org/invented-retraction",
        "reason": "the journal retracted the report; it names an error in the allocation list (invented)",
        "seen_by": "IN",
    }
    return (as_json("gorse-retraction.json", notice), searches(day, 13, 0))
