"""The entry that everything written to the evidence store starts as."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from treering.terms import Cause, EntryKind


@dataclass(frozen=True, slots=True)
class NewEntry:
    """One entry as it is handed to the evidence store.

    Parameters
    ----------
    kind : EntryKind
        What the entry records.
    key : str
        Its name in the store; a key has at most one live entry.
    body : Mapping of str to JSON value
        The content: plain JSON values, dates as ISO strings, absent as None.
    true_at : str
        ISO date at which it was true in the world.
    by : str
        Id of the person it comes from, or "treering".
    cause : Cause, optional
        Why a number may differ because of it.
    reason : str, optional
        The reason in words.
    replaces : int, optional
        Sequence number of the live entry with this key that it replaces.
    """

    kind: EntryKind
    key: str
    body: Mapping[str, Any]
    true_at: str
    by: str = "treering"
    cause: Cause | None = None
    reason: str | None = None
    replaces: int | None = None
