"""Checks across records and store: what would take one place twice, and what is odd across files."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator

from treering.intake.check_links import link_faults
from treering.intake.check_readings import adjudication_faults, is_repeat, reading_faults, trial_faults
from treering.intake.scene import Scene
from treering.intake.values import Fault, Located, Remark
from treering.records import (
    Acknowledgement,
    Adjudication,
    Certainty,
    Extraction,
    IntegrityNotice,
    RiskOfBias,
    SearchRun,
    Waiver,
    Withdrawal,
)
from treering.terms import EntryKind


def faults_together(scene: Scene) -> Iterator[Fault]:
    """Yield what is wrong with records in the light of the store and of each other."""
    yield from _repeats(scene)
    for located, record, number, result in scene.readings():
        yield from reading_faults(scene, located, record, number, result)
    for located, extraction in scene.of(Extraction):
        yield from trial_faults(scene, located, extraction)
    for located, adjudication in scene.of(Adjudication):
        yield from adjudication_faults(scene, located, adjudication)
    yield from link_faults(scene)


def remarks_together(scene: Scene) -> Iterator[Remark]:
    """Yield what a reviewer should look at across records."""
    for located, record, number, result in scene.readings():
        if is_repeat(scene, record, result):
            path = located.path(number, "outcome")
            yield located.remark(path, "this reading is in the store already; nothing changes.")
        case = scene.known_cases.get((record.trial, result.outcome))
        if record.correction and case and case.verification is None and len(case.readings) > 1:
            sentence = "two readings are in: a difference is settled by the adjudicator, at the source."
            yield located.remark("correction", sentence)
    readers: dict[tuple[str, str], set[str]] = {}
    for located, extraction in scene.of(Extraction):
        readers.setdefault((located.place.file, extraction.trial), set()).add(extraction.extractor)
    files = sorted({file for (file, _), people in readers.items() if len(people) > 1})
    for file in files:
        yield Remark(file, "", "it holds both readings of a trial; two people should extract apart.")
    for located, run in scene.of(SearchRun):
        yield from _search_remarks(scene, located, run)


def _signature(located: Located) -> tuple[str, ...] | None:
    """Name the place in the store that a record would take; two records can't take one."""
    record = located.record
    name = record.record
    if isinstance(record, Adjudication | Waiver | RiskOfBias):
        return (name, record.trial, record.outcome)
    if isinstance(record, Certainty):
        return (name, record.outcome)
    if isinstance(record, Withdrawal):
        return (name, record.key)
    if isinstance(record, Acknowledgement):
        return (name, record.notice)
    if isinstance(record, IntegrityNotice):
        return (name, record.trial, record.notice.value, record.date.isoformat())
    if isinstance(record, SearchRun):
        return (name, record.source, record.date.isoformat())
    return None


def _repeats(scene: Scene) -> Iterator[Fault]:
    """Refuse two records of one drop that would take one place, whichever came first."""
    readings = [
        (located, ("extraction", r.trial, result.outcome, r.extractor))
        for located, r, _, result in scene.readings()
    ]
    others = [(located, sign) for located in scene.records if (sign := _signature(located))]
    counts = Counter(sign for _, sign in [*readings, *others])
    for located, sign in readings:
        if counts[sign] > 1:
            sentence = (
                f"{sign[3]} stands as extractor of trial {sign[1]}, outcome {sign[2]}, more than once; "
                "the second reading must come from another person."
            )
            yield located.fault("extractor", sentence)
    for located, sign in others:
        if counts[sign] > 1:
            yield located.fault("", f"this {sign[0]} was dropped more than once: {', '.join(sign[1:])}.")


def _search_remarks(scene: Scene, located: Located, record: SearchRun) -> Iterator[Remark]:
    earlier = [e for e in scene.view.live(EntryKind.SEARCH) if e.body["source"] == record.source]
    if not earlier:
        return
    last = max(earlier, key=lambda entry: (entry.true_at, entry.seq))
    if record.hits == 0 and any(entry.body["hits"] for entry in earlier):
        sentence = f"{record.source} gave hits before and none now; did the search run?"
        yield located.remark("hits", sentence)
    if last.body["strategy_sha256"] != record.strategy_sha256():
        yield located.remark("strategy", f"the strategy differs from that of {last.true_at}.")
