"""From the readings in the store to verified results, with all that waits and for whom. Pure."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from treering.intake.numbers import Finding, effect_faults, number_faults
from treering.intake.pair import Case, Final, Need, Waiting, judge
from treering.intake.reread import drawn_fields, third_readings
from treering.intake.verified import final_entries
from treering.intake.view import StateView, StoredView
from treering.protocol import Protocol
from treering.records import NewEntry
from treering.terms import EntryKind


@dataclass(frozen=True, slots=True)
class Settled:
    """What one run makes of the readings.

    Parameters
    ----------
    entries : tuple of NewEntry
        Studies, arms, reports, verifications and results, ready to append.
    waiting : tuple of dict
        Results that wait: trial, outcome, needs, why, since, readers, differences.
    third_readings : tuple of dict
        Drawn fields of verified results that a third person should read again: trial, outcome, report,
        fields. They hold nothing back.
    """

    entries: tuple[NewEntry, ...]
    waiting: tuple[dict[str, Any], ...]
    third_readings: tuple[dict[str, Any], ...]


def settle(view: StateView, protocol: Protocol, *, read_again: Collection[str] = frozenset()) -> Settled:
    """Verify what two readings, an adjudication or a waiver allow, and list what waits.

    Parameters
    ----------
    view : StateView
        The state of the store after the dropped records were appended.
    protocol : Protocol
        Verification rule and outcomes.
    read_again : collection of str
        Trials of which every agreed number is read a third time, whatever the draw says: those whose
        removal would make or undo a crossing.

    Returns
    -------
    Settled
        In order of trial and outcome; empty entries when nothing new can be verified.
    """
    entries: dict[str, NewEntry] = {}
    waiting: list[Waiting] = []
    for answer in _answers(view, protocol):
        if isinstance(answer, Waiting):
            waiting.append(answer)
        else:
            entries.update((entry.key, entry) for entry in final_entries(answer, view, entries))
    tasks: list[dict[str, Any]] = []
    for key in [key for key in entries if key.startswith("verification/")]:
        verified = entries[key].body
        share = _share(verified, protocol, read_again)
        _draw(verified, view, share, tasks, entries)
    for verification in view.live(EntryKind.VERIFICATION):
        if verification.key not in entries:
            share = _share(verification.body, protocol, read_again)
            _reread(verification, view, protocol, share, tasks, waiting, entries)
    tasks.sort(key=lambda task: (task["trial"], task["outcome"]))
    waiting.sort(key=lambda item: (item.trial, item.outcome))
    return Settled(tuple(entries.values()), tuple(item.to_dict() for item in waiting), tuple(tasks))


def cases(view: StateView) -> tuple[Case, ...]:
    """Return what is live about each trial and outcome that has a reading, in order."""
    return tuple(_cases(view))


def _cases(view: StateView) -> Iterator[Case]:
    groups: dict[tuple[str, str], list[StoredView]] = {}
    for entry in view.live(EntryKind.EXTRACTION):
        if not entry.body["third_reading"]:
            groups.setdefault((entry.body["trial"], entry.body["outcome"]), []).append(entry)
    used: dict[tuple[str, str], set[int]] = {}
    for verification in view.all(EntryKind.VERIFICATION):
        body = verification.body
        used.setdefault((body["trial"], body["outcome"]), set()).update(body["extractions"])
    for (trial, outcome), readings in sorted(groups.items()):
        yield Case(
            trial,
            outcome,
            tuple(readings),
            verification=view.get(f"verification/{trial}/{outcome}"),
            adjudication=view.get(f"adjudication/{trial}/{outcome}"),
            waiver=view.get(f"waiver/{trial}/{outcome}"),
            used=frozenset(used.get((trial, outcome), ())),
        )


def _answers(view: StateView, protocol: Protocol) -> list[Final | Waiting]:
    """Judge every case and let no impossible combination of settled numbers through."""
    tolerance = protocol.verification.relative_tolerance
    judged = [judge(case, tolerance=tolerance) for case in _cases(view)]
    answers = [
        _held(answer, protocol) if isinstance(answer, Final) else answer for answer in judged if answer
    ]
    usable = [(at, a) for at, a in enumerate(answers) if isinstance(a, Final) and _is_usable(a)]
    measures = {outcome.id: outcome.measure for outcome in protocol.outcomes}
    found = effect_faults([(a.reading["values"], measures[a.case.outcome]) for _, a in usable])
    for (at, final), finding in zip(usable, found, strict=True):
        if finding is not None:
            answers[at] = _unsound(final, [finding])
    return answers


def _is_usable(final: Final) -> bool:
    return final.reading["not_usable"] is None


def _held(final: Final, protocol: Protocol) -> Final | Waiting:
    """Hold a verified reading against the protocol as it is now."""
    outcome = protocol.outcome(final.case.outcome)
    if outcome is None:
        return _held_back(final, "protocol", "the outcome no longer stands in the protocol.")
    if not _is_usable(final):
        return final
    randomised = final.reading["study"].get("randomised")
    arms = [(arm["side"], arm["randomised"]) for arm in final.reading["arms"]]
    faults = number_faults(final.reading["values"], outcome, randomised=randomised, arms=arms)
    return _unsound(final, faults) if faults else final


def _unsound(final: Final, faults: Sequence[Finding]) -> Waiting:
    why = "; ".join(f"{fault.field}: {fault.sentence}" for fault in faults)
    return _held_back(final, "sound numbers", why)


def _held_back(final: Final, needs: Need, why: str) -> Waiting:
    since = max(entry.known_at for entry in final.inputs)[:10]
    readers = tuple(str(entry.body["extractor"]) for entry in final.readings)
    return Waiting(final.case.trial, final.case.outcome, needs, why, since, readers)


def _share(verification: Mapping[str, Any], protocol: Protocol, read_again: Collection[str]) -> float:
    return 1.0 if verification["trial"] in read_again else protocol.verification.reread_share


def _draw(
    verification: Mapping[str, Any],
    view: StateView,
    share: float,
    tasks: list[dict[str, Any]],
    entries: Mapping[str, NewEntry],
) -> None:
    """List the fields of a result verified in this run that are drawn for a third reading."""
    key = f"result/{verification['trial']}/{verification['outcome']}"
    live = view.get(key)
    result = entries[key].body if key in entries else live.body if live else None
    if result is None:
        return
    drawn = drawn_fields(result, verification["agreed"], share)
    if drawn:
        tasks.append(_task(result, drawn))


def _task(result: Mapping[str, Any], fields: Sequence[str]) -> dict[str, Any]:
    shown = {name: result[name] for name in ("trial", "outcome", "report")}
    return {**shown, "fields": list(fields)}


def _reread(
    verification: StoredView,
    view: StateView,
    protocol: Protocol,
    share: float,
    tasks: list[dict[str, Any]],
    waiting: list[Waiting],
    entries: dict[str, NewEntry],
) -> None:
    """List the third readings of one verified result that are due, done or at odds with it."""
    trial, outcome = verification.body["trial"], verification.body["outcome"]
    result = view.get(f"result/{trial}/{outcome}")
    if result is None:
        return
    drawn = drawn_fields(result.body, verification.body["agreed"], share)
    readings = [
        entry
        for entry in view.live(EntryKind.EXTRACTION)
        if entry.body["third_reading"]
        and (entry.body["trial"], entry.body["outcome"]) == (trial, outcome)
        and entry.seq > max(verification.body["extractions"])
    ]
    found = third_readings(result, drawn, readings, protocol.verification.relative_tolerance)
    if found.differences:
        who = " and ".join(found.readers)
        why = f"the third reading by {who} differs; both extractors must read again and drop a correction."
        since = max(entry.known_at for entry in readings)[:10]
        waiting.append(Waiting(trial, outcome, "correction", why, since, found.readers, found.differences))
    elif found.to_read:
        tasks.append(_task(result.body, found.to_read))
    elif found.confirmed and not verification.body["reread"]:
        entries[verification.key] = _confirmed(verification, readings)


def _confirmed(verification: StoredView, readings: list[StoredView]) -> NewEntry:
    """Mark a verification as read again."""
    return NewEntry(
        kind=EntryKind.VERIFICATION,
        key=verification.key,
        body={**verification.body, "reread": True},
        true_at=max(entry.known_at for entry in readings)[:10],
        reason="a third reading confirms the drawn fields",
        replaces=verification.seq,
    )
