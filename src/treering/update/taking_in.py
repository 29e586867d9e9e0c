"""From files in intake/ to entries: read, check and pair, writing nothing."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from treering.intake import Checked, Dropped, check, entries_for, read_folder, read_records, settle
from treering.records import NewEntry
from treering.store import State
from treering.terms import EntryKind
from treering.update.context import Review
from treering.update.plan_changes import protocol_entries


@dataclass(frozen=True)
class TakenIn:
    """What an update would append, and what it leaves waiting.

    Parameters
    ----------
    checked : Checked
        The files of the intake folder, sorted by what becomes of them.
    entries : tuple of NewEntry
        In the order in which they are appended.
    waiting : tuple of dict
        Results that are not verified yet: trial, outcome, why, differences.
    """

    checked: Checked
    entries: tuple[NewEntry, ...]
    waiting: tuple[dict[str, Any], ...] = ()

    @property
    def returned(self) -> list[dict[str, Any]]:
        """The files that go back, with their faults in words."""
        return [
            {"file": dropped.shown, "faults": _sentences(self.checked, dropped)}
            for dropped in self.checked.returned
        ]

    @property
    def remarks(self) -> list[str]:
        """What a reviewer should look at although it is taken in."""
        return [str(remark) for remark in self.checked.remarks]


def read_intake(review: Review, state: State, day: str) -> TakenIn:
    """Read and check every file in intake/ against protocol and store.

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
    TakenIn
        Without the results that pairing will verify.

    Raises
    ------
    AmendmentError
        When the plan changed without an amendment.
    """
    plan = protocol_entries(review, state, day)
    parsed = read_records(read_folder(review.intake))
    checked = check(parsed, review.protocol, state, known_date=day)
    fresh = entries_for(checked, review.protocol, state, day)
    back = [_returned(dropped, checked, day) for dropped in checked.returned]
    return TakenIn(checked, (*plan, *back, *fresh))


def verify(review: Review, state: State, read: TakenIn, known_at: str) -> TakenIn:
    """Pair what was read and add the results that two people, or a third, have verified.

    Parameters
    ----------
    review : Review
        The review folder.
    state : State
        The evidence before this run.
    read : TakenIn
        What `read_intake` gave.
    known_at : str
        ISO date-time of the run.

    Returns
    -------
    TakenIn
    """
    settled = settle(state.after(read.entries, known_at=known_at), review.protocol)
    return TakenIn(read.checked, read.entries + settled.entries, settled.waiting)


def _sentences(checked: Checked, dropped: Dropped) -> list[str]:
    return [str(fault) for fault in checked.faults_of(dropped)]


def _returned(dropped: Dropped, checked: Checked, day: str) -> NewEntry:
    """Record that a file was given back and why: nothing received is ever lost, not even a bad file."""
    body = {
        "file": dropped.shown,
        "sha256": dropped.sha256,
        "size": len(dropped.content),
        "record": None,
        "faults": _sentences(checked, dropped),
    }
    return NewEntry(EntryKind.RECEIPT, f"receipt/{dropped.sha256}/returned/{day}", body, true_at=day)


def moved(checked: Checked) -> Sequence[Dropped]:
    """Return the files that go to filed/: taken in now, or in the store already."""
    return (*checked.accepted, *checked.doubles)
