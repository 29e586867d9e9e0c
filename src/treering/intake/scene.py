"""What a check needs to see at once: the store, the protocol and the other records of the drop."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, TypeVar

from treering.intake.bodies import extraction_body
from treering.intake.pair import Case, pending_readings
from treering.intake.settle import cases
from treering.intake.values import Located
from treering.intake.view import StateView
from treering.protocol import Protocol
from treering.records import Adjudication, Extraction, Record, Result
from treering.terms import EntryKind

RecordT = TypeVar("RecordT", bound=Record)


@dataclass(frozen=True)
class Scene:
    """The records of one drop before the state of the store.

    Parameters
    ----------
    protocol : Protocol
        Outcomes, people and rules.
    view : StateView
        The state of the store before the drop.
    records : sequence of Located
        The records that still stand.
    known_date : str, optional
        ISO date of the run; without it no date is called future.
    """

    protocol: Protocol
    view: StateView
    records: Sequence[Located]
    known_date: str | None = None

    def of(self, shape: type[RecordT]) -> Iterator[tuple[Located, RecordT]]:
        """Yield the dropped records of one kind, in file order."""
        for located in self.records:
            if isinstance(located.record, shape):
                yield located, located.record

    def readings(self) -> Iterator[tuple[Located, Extraction, int, Result]]:
        """Yield each dropped reading of one outcome, with its number in the record."""
        for located, record in self.of(Extraction):
            for number, result in enumerate(record.results):
                yield located, record, number, result

    @cached_property
    def known_cases(self) -> Mapping[tuple[str, str], Case]:
        """What the store holds about each trial and outcome that has a reading."""
        return {(case.trial, case.outcome): case for case in cases(self.view)}

    @cached_property
    def stored_readers(self) -> Mapping[str, frozenset[str]]:
        """Who has read each trial according to the store."""
        return _by_trial((e.body["trial"], e.body["extractor"]) for e in self.view.live(EntryKind.EXTRACTION))

    @cached_property
    def readers(self) -> Mapping[str, frozenset[str]]:
        """Who has read each trial, this drop included."""
        dropped = [(record.trial, record.extractor) for _, record in self.of(Extraction)]
        stored = [(trial, who) for trial, people in self.stored_readers.items() for who in people]
        return _by_trial(iter([*stored, *dropped]))

    @cached_property
    def adjudicators(self) -> Mapping[str, frozenset[str]]:
        """Who has adjudicated each trial, this drop included."""
        live = self.view.live(EntryKind.ADJUDICATION)
        stored = [(e.body["trial"], e.body["adjudicator"]) for e in live]
        dropped = [(record.trial, record.adjudicator) for _, record in self.of(Adjudication)]
        return _by_trial(iter([*stored, *dropped]))

    @cached_property
    def trials(self) -> frozenset[str]:
        """Trials that the store or this drop knows."""
        return frozenset(self.readers) | {e.body["trial"] for e in self.view.live(EntryKind.STUDY)}

    @cached_property
    def known_results(self) -> frozenset[tuple[str, str]]:
        """Trials and outcomes that the store or this drop has a reading of."""
        dropped = {(record.trial, result.outcome) for _, record, _, result in self.readings()}
        return frozenset(self.known_cases) | dropped

    @cached_property
    def open_readings(self) -> Mapping[tuple[str, str], Mapping[tuple[str, str], Mapping[str, Any]]]:
        """Bodies of the readings that no verification has used, this drop included.

        By trial and outcome, then by report and extractor.
        """
        found: dict[tuple[str, str], dict[tuple[str, str], Mapping[str, Any]]] = {}
        for key, case in self.known_cases.items():
            found[key] = {(e.body["report"], e.body["extractor"]): e.body for e in pending_readings(case)}
        for _, record, _, result in self.readings():
            if record.third_reading:
                continue
            group = found.setdefault((record.trial, result.outcome), {})
            for report, who in [key for key in group if key[1] == record.extractor]:
                del group[report, who]
            group[record.report.id, record.extractor] = extraction_body(record, result)
        return found

    @cached_property
    def report_trials(self) -> Mapping[str, frozenset[str]]:
        """To which trials each report is said to belong."""
        stored = [(e.body["report"], e.body["trial"]) for e in self.view.live(EntryKind.EXTRACTION)]
        stored += [(e.body["report"], e.body["trial"]) for e in self.view.live(EntryKind.REPORT)]
        dropped = [(record.report.id, record.trial) for _, record in self.of(Extraction)]
        return _by_trial(iter([*stored, *dropped]))

    @cached_property
    def registrations(self) -> Mapping[str, frozenset[str]]:
        """Which trials stand under each register number."""
        found = []
        for entry in self.view.live(EntryKind.EXTRACTION):
            found.append((entry.body["study"]["registration"], entry.body["trial"]))
        found += [(record.registration, record.trial) for _, record in self.of(Extraction)]
        return _by_trial((str(number).casefold(), trial) for number, trial in found if number)

    @cached_property
    def spellings(self) -> Mapping[str, frozenset[str]]:
        """How the id of each trial is written, by its lower-case form."""
        return _by_trial((trial.casefold(), trial) for trial in self.trials)

    def usual_sds(self, outcome: str, *, but: str) -> list[float]:
        """Return the standard deviations of an outcome in the verified trials, one trial left out."""
        return [
            float(entry.body["values"][name])
            for entry in self.view.live(EntryKind.RESULT)
            if entry.body["outcome"] == outcome and entry.body["trial"] != but
            for name in ("intervention_sd", "comparator_sd")
            if name in entry.body["values"]
        ]


def _by_trial(pairs: Iterator[tuple[str, str]]) -> dict[str, frozenset[str]]:
    found: dict[str, set[str]] = {}
    for name, value in pairs:
        found.setdefault(name, set()).add(value)
    return {name: frozenset(values) for name, values in found.items()}
