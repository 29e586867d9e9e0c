"""Which two readings make a verified result, and which wait for whom. Pure."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

from treering.intake.compare import Comparison, Difference, compare_readings
from treering.intake.merge import merged, open_fields
from treering.intake.view import StoredView

Basis = Literal["agreed", "adjudicated", "waiver"]
Need = Literal["second reading", "adjudication", "unresolved", "correction", "sound numbers", "protocol"]


@dataclass(frozen=True, slots=True)
class Case:
    """All that is live about one trial and outcome.

    ``readings`` are the live extractions that count as one of the two (third readings stand apart);
    ``used`` are the places of those that some verification, also a replaced one, was made from.
    """

    trial: str
    outcome: str
    readings: tuple[StoredView, ...]
    verification: StoredView | None = None
    adjudication: StoredView | None = None
    waiver: StoredView | None = None
    used: frozenset[int] = frozenset()


@dataclass(frozen=True, slots=True)
class Waiting:
    """A result that is not verified yet, with what it waits for."""

    trial: str
    outcome: str
    needs: Need
    why: str
    since: str
    readers: tuple[str, ...] = ()
    differences: tuple[Difference, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """Return plain values for the run's entry and the work list."""
        return {
            "trial": self.trial,
            "outcome": self.outcome,
            "needs": self.needs,
            "why": self.why,
            "since": self.since,
            "readers": list(self.readers),
            "differences": [
                {**d.to_dict(), "first_place": d.first_place, "second_place": d.second_place}
                for d in self.differences
            ],
        }


@dataclass(frozen=True, slots=True)
class Final:
    """One verified reading and what it rests on.

    ``reading`` has the shape of an extraction's body; ``inputs`` are the entries it was made from, the
    readings first.
    """

    case: Case
    basis: Basis
    reading: Mapping[str, Any]
    readings: tuple[StoredView, ...]
    comparison: Comparison
    adjudication: StoredView | None = None
    waiver: StoredView | None = None

    @property
    def inputs(self) -> tuple[StoredView, ...]:
        """The entries that the verified reading was made from."""
        others = (entry for entry in (self.adjudication, self.waiver) if entry is not None)
        return (*self.readings, *others)


def pending_readings(case: Case) -> tuple[StoredView, ...]:
    """Return the readings that no verification has used yet, ordered by extractor.

    A result that was let in by a waiver takes its one reading along when a second one comes.
    """
    fresh = tuple(entry for entry in case.readings if entry.seq not in case.used)
    if fresh and case.verification is not None and case.verification.body["basis"] == "waiver":
        reports = {entry.body["report"] for entry in fresh}
        fresh = tuple(entry for entry in case.readings if entry.body["report"] in reports)
    return tuple(sorted(fresh, key=lambda entry: (str(entry.body["extractor"]), entry.seq)))


def judge(case: Case, *, tolerance: float = 0.0) -> Final | Waiting | None:
    """Say whether a trial's result for one outcome is verified now, waits, or needs nothing.

    Parameters
    ----------
    case : Case
        What is live about the trial and outcome.
    tolerance : float
        Relative tolerance of the protocol for measured numbers.

    Returns
    -------
    Final, Waiting or None
        None when every reading is already used.
    """
    pending = pending_readings(case)
    if not pending:
        return None
    by_report: dict[str, list[StoredView]] = {}
    for entry in pending:
        by_report.setdefault(entry.body["report"], []).append(entry)
    pairs = [group for group in by_report.values() if len(group) >= 2]
    if pairs:
        newest = max(pairs, key=lambda group: max(entry.seq for entry in group))
        return _judge_pair(case, newest[0], newest[1], tolerance)
    if len(by_report) == 1 and _waiver_applies(case):
        return _waived(case, pending[0])
    return _waits_for_reading(case, pending)


def _judge_pair(case: Case, first: StoredView, second: StoredView, tolerance: float) -> Final | Waiting:
    comparison = compare_readings(first.body, second.body, tolerance=tolerance)
    pair = (first, second)
    if not comparison.differences:
        reading = merged(first.body, second.body, {})
        return Final(case, "agreed", reading, pair, comparison)
    names = " and ".join(str(entry.body["extractor"]) for entry in pair)
    adjudication = case.adjudication
    if adjudication is None or adjudication.seq < max(entry.seq for entry in pair):
        count = len(comparison.differences)
        fields = "1 field" if count == 1 else f"{count} fields"
        why = f"{names} differ in {fields}; an adjudicator must go back to the report."
        return _waiting(case, pair, "adjudication", why, comparison.differences)
    if adjudication.body["unresolved"]:
        why = f"{adjudication.body['adjudicator']} left it unresolved: {adjudication.body['reason']}"
        return _waiting(case, (*pair, adjudication), "unresolved", why, comparison.differences)
    still_open = open_fields(comparison.differences, adjudication.body)
    if still_open:
        fields = ", ".join(d.field for d in still_open)
        why = f"the adjudication by {adjudication.body['adjudicator']} leaves open: {fields}."
        return _waiting(case, (*pair, adjudication), "adjudication", why, still_open)
    reading = merged(first.body, second.body, adjudication.body)
    return Final(case, "adjudicated", reading, pair, comparison, adjudication=adjudication)


def _waiver_applies(case: Case) -> bool:
    """Say whether there is a waiver that no verification has used."""
    if case.waiver is None:
        return False
    return case.verification is None or case.verification.body.get("waiver") != case.waiver.seq


def _waived(case: Case, entry: StoredView) -> Final:
    return Final(
        case,
        "waiver",
        merged(entry.body, entry.body, {}),
        (entry,),
        Comparison(tuple(entry.body["values"]), (), ()),
        waiver=case.waiver,
    )


def _waits_for_reading(case: Case, pending: Sequence[StoredView]) -> Waiting:
    readers = " and ".join(str(entry.body["extractor"]) for entry in pending)
    if len(pending) > 1:
        reports = tuple(str(entry.body["report"]) for entry in pending[:2])
        why = f"{readers} read different reports ({' and '.join(reports)}); one report needs two readers."
        return _waiting(case, pending, "second reading", why, (Difference("report", *reports),))
    if case.verification is not None and pending[0].body["correction"]:
        why = f"the correction by {readers} waits for the second extractor to read again."
    else:
        why = f"only {readers} has read it; a second extractor must read it apart."
    return _waiting(case, pending, "second reading", why)


def _waiting(
    case: Case,
    inputs: Sequence[StoredView],
    needs: Need,
    why: str,
    differences: tuple[Difference, ...] = (),
) -> Waiting:
    readers = tuple(str(e.body["extractor"]) for e in inputs if "extractor" in e.body)
    since = max(entry.known_at for entry in inputs)[:10]
    return Waiting(case.trial, case.outcome, needs, why, since, readers, differences)
