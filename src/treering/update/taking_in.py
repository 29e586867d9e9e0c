"""From files in intake/ to entries: read, check and pair, writing nothing."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from treering.intake import Dropped, check, entries_for, read_folder, read_records, settle
from treering.protocol import Protocol
from treering.records import NewEntry
from treering.store import State
from treering.terms import EntryKind
from treering.update.context import Review
from treering.update.plan_changes import protocol_entries


@dataclass(frozen=True)
class FileOutcome:
    """What becomes of one dropped file.

    Parameters
    ----------
    dropped : Dropped
        The file as it was read.
    faults : tuple of str
        One sentence per fault; empty when the file is taken in.
    remarks : tuple of str
        What a person should look at although the file is taken in.
    """

    dropped: Dropped
    faults: tuple[str, ...]
    remarks: tuple[str, ...]


@dataclass(frozen=True)
class TakenIn:
    """What an update would append, and what it leaves waiting.

    Parameters
    ----------
    files : tuple of FileOutcome
        Every file of the intake folder, by name.
    entries : tuple of NewEntry
        In the order in which they are appended.
    waiting : tuple of dict
        Results that are not verified yet: trial, outcome, why, differences.
    """

    files: tuple[FileOutcome, ...]
    entries: tuple[NewEntry, ...]
    waiting: tuple[dict[str, Any], ...]

    @property
    def returned(self) -> tuple[FileOutcome, ...]:
        """The files that go back."""
        return tuple(file for file in self.files if file.faults)


def read_intake(
    review: Review, state: State, day: str
) -> tuple[tuple[FileOutcome, ...], tuple[NewEntry, ...]]:
    """Read and check every file in intake/, each against the state that the files before it would leave.

    Parameters
    ----------
    review : Review
        The review folder.
    state : State
        The evidence as it stands.
    day : str
        ISO date of the run.

    Returns
    -------
    tuple of FileOutcome, tuple of NewEntry

    Raises
    ------
    AmendmentError
        When the plan changed without an amendment.
    """
    entries = list(protocol_entries(review, state, day))
    state = state.after(entries)
    files = []
    for dropped in read_folder(review.intake):
        outcome, fresh = _one_file(dropped, review.protocol, state, day)
        files.append(outcome)
        entries.extend(fresh)
        state = state.after(fresh)
    return tuple(files), tuple(entries)


def _one_file(
    dropped: Dropped, protocol: Protocol, state: State, day: str
) -> tuple[FileOutcome, Sequence[NewEntry]]:
    checked = check(read_records(dropped), protocol, state)
    if checked.faults:
        return FileOutcome(dropped, tuple(checked.faults), ()), (_returned(dropped, checked.faults, day),)
    fresh = entries_for(checked, protocol, state, day)
    return FileOutcome(dropped, (), tuple(checked.remarks)), fresh


def verify(
    review: Review, state: State, files: tuple[FileOutcome, ...], entries: tuple[NewEntry, ...]
) -> TakenIn:
    """Pair what was read and add the results that two people, or a third, have verified.

    Parameters
    ----------
    review : Review
        The review folder.
    state : State
        The evidence before this run.
    files, entries
        What `read_intake` gave.

    Returns
    -------
    TakenIn
    """
    settled = settle(state.after(entries), review.protocol)
    return TakenIn(files, entries + tuple(settled.entries), tuple(settled.waiting))


def _returned(dropped: Dropped, faults: Sequence[str], day: str) -> NewEntry:
    """Record that a file was given back and why: nothing received is ever lost, not even a bad file."""
    return NewEntry(
        EntryKind.RECEIPT,
        f"receipt/{dropped.sha256}/returned/{day}",
        {
            "file": dropped.name,
            "sha256": dropped.sha256,
            "size": len(dropped.content),
            "record": None,
            "faults": list(faults),
        },
        true_at=day,
    )
