"""What an update would do, writing nothing."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from treering.errors import NoStoreError
from treering.protocol import Protocol
from treering.store import State
from treering.terms import EntryKind, PersonRole
from treering.update.context import open_evidence, read_review
from treering.update.taking_in import moved, read_intake, verify
from treering.update.versions import TRIGGERS


def preview(folder: Path, known_at: str) -> dict[str, Any]:
    """Read config and intake of the review in `folder` and say what an update would do.

    Parameters
    ----------
    folder : Path
        The review folder.
    known_at : str
        ISO date-time that the update would have.

    Returns
    -------
    dict
        files, returned (file, faults), remarks, verified (trial, outcome), waiting, new_version.

    Raises
    ------
    TreeringError
        When config or store cannot be used, or the plan changed without an amendment.
    """
    review = read_review(folder)
    try:
        with open_evidence(review) as store:
            state = store.state()
    except NoStoreError:
        state = State(())
    taken = verify(review, state, read_intake(review, state, known_at[:10]), known_at)
    after = state.after(taken.entries, known_at=known_at)
    fresh = [entry for entry in after.everything() if entry.seq >= len(state)]
    return {
        "files": [dropped.shown for dropped in (*moved(taken.checked), *taken.checked.returned)],
        "returned": taken.returned,
        "remarks": [*_team_remarks(review.protocol), *taken.remarks],
        "verified": [
            {"trial": entry.body["trial"], "outcome": entry.body["outcome"]}
            for entry in fresh
            if entry.kind is EntryKind.RESULT
        ],
        "waiting": list(taken.waiting),
        "new_version": any(entry.kind in TRIGGERS for entry in fresh),
    }


def _team_remarks(protocol: Protocol) -> list[str]:
    """Say which roles nobody holds yet that every verified result needs."""
    needed = {PersonRole.EXTRACTOR: protocol.verification.extractors, PersonRole.ADJUDICATOR: 1}
    held = {role: sum(role in person.roles for person in protocol.people) for role in needed}
    return [
        f"config/review.toml names {held[role] or 'no'} person as {role.value}; verification needs {number}."
        for role, number in needed.items()
        if held[role] < number
    ]
