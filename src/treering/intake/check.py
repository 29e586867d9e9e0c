"""Which files of a drop are taken in, which go back, and why. Pure."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from treering.intake.check_alone import faults_alone, faults_of_effects, remarks_alone
from treering.intake.check_together import faults_together, remarks_together
from treering.intake.scene import Scene
from treering.intake.values import Checked, Dropped, Fault, Located, Parsed, Remark
from treering.intake.view import StateView
from treering.protocol import Protocol


def check(parsed: Parsed, protocol: Protocol, view: StateView, *, known_date: str | None = None) -> Checked:
    """Hold the records of a drop against the protocol, the store and each other.

    A file with one fault goes back whole; what hung on it is judged again without it, so an adjudication
    whose readings went back goes back too. The order of the files makes no difference.

    Parameters
    ----------
    parsed : Parsed
        What was read.
    protocol : Protocol
        Outcomes, people and rules.
    view : StateView
        The state of the store before the drop.
    known_date : str, optional
        ISO date of the run; a date after it is a fault.

    Returns
    -------
    Checked
    """
    copies = _copies(parsed, view)
    records = [item for item in parsed.records if item.place.file not in copies]
    faults = list(parsed.faults)
    records = _standing(records, faults)
    scene = Scene(protocol, view, records, known_date)
    faults += [fault for item in records for fault in faults_alone(item, scene)]
    records = _standing(records, faults)
    faults += faults_of_effects(Scene(protocol, view, records, known_date))
    records = _standing(records, faults)
    records = _settle_links(records, faults, protocol, view, known_date)
    faults += _faults_of_copies(copies, faults)
    returned = {fault.file for fault in faults}
    doubles = _named(parsed.dropped, set(copies) - returned)
    scene = Scene(protocol, view, records, known_date)
    return Checked(
        accepted=_named(parsed.dropped, {item.place.file for item in records}),
        doubles=doubles,
        returned=_named(parsed.dropped, returned),
        records=tuple(records),
        faults=tuple(dict.fromkeys(faults)),
        remarks=(*_double_remarks(doubles), *_remarks(records, scene)),
    )


def _standing(records: Sequence[Located], faults: Iterable[Fault]) -> list[Located]:
    """Drop the records of every file that has a fault."""
    bad = {fault.file for fault in faults}
    return [item for item in records if item.place.file not in bad]


def _settle_links(
    records: list[Located],
    faults: list[Fault],
    protocol: Protocol,
    view: StateView,
    known_date: str | None,
) -> list[Located]:
    """Judge the records together until no further file falls out."""
    while found := list(faults_together(Scene(protocol, view, records, known_date))):
        faults += found
        records = _standing(records, faults)
    return records


def _copies(parsed: Parsed, view: StateView) -> dict[str, str | None]:
    """Find files whose content the store or an earlier file of the drop holds; name that file, if any."""
    faulty = {fault.file for fault in parsed.faults}
    first: dict[str, str] = {}
    found: dict[str, str | None] = {}
    for file in parsed.dropped:
        if file.shown in faulty:
            continue
        # A file that was given back has no such receipt: dropped again, it is read again.
        if view.get(f"receipt/{file.sha256}") is not None:
            found[file.shown] = None
        elif file.sha256 in first:
            found[file.shown] = first[file.sha256]
        else:
            first[file.sha256] = file.shown
    return found


def _faults_of_copies(copies: Mapping[str, str | None], faults: Sequence[Fault]) -> list[Fault]:
    """Send a copy back with the faults of the file that it is a copy of."""
    return [
        Fault(copy, fault.where, fault.sentence)
        for copy, original in copies.items()
        for fault in faults
        if fault.file == original
    ]


def _double_remarks(doubles: Iterable[Dropped]) -> list[Remark]:
    sentence = "the same content was taken in before; nothing changes."
    return [Remark(file.shown, "", sentence) for file in doubles]


def _remarks(records: Sequence[Located], scene: Scene) -> list[Remark]:
    found = [remark for item in records for remark in remarks_alone(item, scene)]
    return list(dict.fromkeys([*found, *remarks_together(scene)]))


def _named(files: Iterable[Dropped], names: set[str]) -> tuple[Dropped, ...]:
    return tuple(file for file in files if file.shown in names)
