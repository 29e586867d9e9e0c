"""Which two readings make a verified result, and which wait for whom. Pure."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

from treering.intake.compare import Comparison, Difference, compare_readings
from treering.intake.view import StoredView

Basis = Literal["agreed", "adjudicated", "waiver"]
Need = Literal["second reading", "adjudication", "unresolved", "correction", "sound numbers", "protocol"]


@dataclass(frozen=True, slots=True)
class Case:
    """All that is live about one trial and outcome.

    ``readings`` are the extractions that count as one of the two; third readings stand apart.
    """

    trial: str
    outcome: str
    readings: tuple[StoredView, ...]
    verification: StoredView | None = None
    adjudication: StoredView | None = None
    waiver: StoredView | None = None


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
    if case.verification is None:
        fresh = case.readings
    else:
        used = set(case.verification.body["extractions"])
        fresh = tuple(entry for entry in case.readings if entry.seq not in used)
        if fresh and case.verification.body["basis"] == "waiver":
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
        reading = _merged(first.body, second.body, {})
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
    still_open = _open_fields(comparison.differences, adjudication.body)
    if still_open:
        fields = ", ".join(d.field for d in still_open)
        why = f"the adjudication by {adjudication.body['adjudicator']} leaves open: {fields}."
        return _waiting(case, (*pair, adjudication), "adjudication", why, still_open)
    reading = _merged(first.body, second.body, adjudication.body)
    return Final(case, "adjudicated", reading, pair, comparison, adjudication=adjudication)


def _open_fields(
    differences: Sequence[Difference], adjudication: Mapping[str, Any]
) -> tuple[Difference, ...]:
    """Return the differences that an adjudication says nothing about."""
    given = {*adjudication["values"], *adjudication["not_reported"]}
    given |= {f"study.{name}" for name in adjudication["study"]}
    given |= {f"subgroup.{name}" for name in adjudication["subgroup"]}
    given |= {"arms"} if adjudication["arms"] else set()
    unusable = adjudication["not_usable"] is not None
    if unusable or adjudication["values"]:
        given.add("not_usable")
    # A result that the adjudicator finds unusable needs no number.
    return tuple(
        d
        for d in differences
        if d.field not in given and not (unusable and not d.field.startswith(("study.", "subgroup.", "arms")))
    )


def _merged(
    first: Mapping[str, Any], second: Mapping[str, Any], settled: Mapping[str, Any]
) -> dict[str, Any]:
    """Make one reading: what is settled, else what the first reader wrote, else the second."""
    values = {**second["values"], **first["values"], **settled.get("values", {})}
    for name in settled.get("not_reported", ()):
        values.pop(name, None)
    places = {**second["locators"], **first["locators"], **settled.get("locators", {})}
    not_usable = first["not_usable"] if first["not_usable"] is not None else second["not_usable"]
    if settled and (settled["not_usable"] is not None or settled["values"]):
        not_usable = settled["not_usable"]
    return {
        "report": first["report"],
        "values": {name: values[name] for name in sorted(values)},
        "locators": {name: places[name] for name in sorted(places) if name in values},
        "origins": _merged_origins(first, second, values),
        "not_usable": not_usable,
        "subgroup": {**first["subgroup"], **settled.get("subgroup", {})},
        "study": _filled(settled.get("study", {}), first["study"], second["study"]),
        "document": _filled(first["document"], second["document"]),
        "arms": settled.get("arms") or first["arms"] or second["arms"],
        "correction": _joined(first["correction"], second["correction"]),
    }


def _merged_origins(
    first: Mapping[str, Any], second: Mapping[str, Any], values: Mapping[str, Any]
) -> dict[str, str]:
    """Keep for each number the origin furthest from print that one of the readers named."""
    rank = ("reported", "converted", "from authors", "read off a graph", "imputed")
    origins = {}
    for name in sorted(values):
        named = [body["origins"][name] for body in (first, second) if name in body["origins"]]
        if named:
            origins[name] = max(named, key=rank.index)
    return origins


def _filled(*sources: Mapping[str, Any]) -> dict[str, Any]:
    """Take each field from the first source that gives it."""
    names = sorted({name for source in sources for name in source})
    return {
        name: next((source[name] for source in sources if source.get(name) is not None), None)
        for name in names
    }


def _joined(*texts: str | None) -> str | None:
    given = sorted({text for text in texts if text})
    return "; ".join(given) or None


def _waiver_applies(case: Case) -> bool:
    """Say whether there is a waiver that no verification has used."""
    if case.waiver is None:
        return False
    return case.verification is None or case.verification.body.get("waiver") != case.waiver.seq


def _waived(case: Case, entry: StoredView) -> Final:
    return Final(
        case,
        "waiver",
        _merged(entry.body, entry.body, {}),
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
