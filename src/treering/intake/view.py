"""What intake reads of the evidence store, without knowing the store."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, Protocol

from treering.terms import Cause, EntryKind


class StoredView(Protocol):
    """One stored entry as intake reads it."""

    @property
    def seq(self) -> int:
        """Place in the ledger."""
        ...

    @property
    def kind(self) -> EntryKind:
        """What the entry records."""
        ...

    @property
    def key(self) -> str:
        """Name in the store."""
        ...

    @property
    def body(self) -> Mapping[str, Any]:
        """Content as plain JSON values."""
        ...

    @property
    def true_at(self) -> str:
        """ISO date at which it was true in the world."""
        ...

    @property
    def known_at(self) -> str:
        """ISO date-time of the run that laid it down."""
        ...

    @property
    def by(self) -> str:
        """Whom it comes from."""
        ...

    @property
    def cause(self) -> Cause | None:
        """Why a number may differ because of it."""
        ...

    @property
    def reason(self) -> str | None:
        """The reason in words."""
        ...


class StateView(Protocol):
    """The state of the evidence store as intake reads it."""

    def live(self, kind: EntryKind) -> Sequence[StoredView]:
        """Return the live entries of one kind, ordered by key."""
        ...

    def get(self, key: str) -> StoredView | None:
        """Return the live entry with this key, or None."""
        ...

    def all(self, kind: EntryKind) -> Sequence[StoredView]:
        """Return every entry of one kind, replaced ones too, by place in the ledger."""
        ...
