"""The values that go in and out of the store: entries, heads, and the canonical bytes of an entry."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from treering.records.entry import NewEntry
from treering.store.canonical import canonical_bytes, canonical_string, parse
from treering.terms import Cause, EntryKind

ENTRY_FORMAT = 1
"""Format number written into the canonical bytes of each entry."""


@dataclass(frozen=True, slots=True)
class Head:
    """Size and root of the Merkle tree over the entries: what is printed and signed.

    Parameters
    ----------
    size : int
        Number of entries.
    root : str
        Root hash, 64 hexadecimal digits.
    """

    size: int
    root: str


@dataclass(frozen=True, slots=True)
class StoredEntry:
    """One entry as it lies in the ledger.

    Parameters
    ----------
    seq : int
        Place in the ledger, from 0.
    kind, key, true_at, by, cause, reason, replaces
        As in :class:`treering.records.NewEntry`.
    known_at : str
        UTC date-time of the run that laid it down.
    hash : str
        SHA-256 of the canonical bytes, hexadecimal.
    canonical : bytes
        The canonical bytes.
    """

    seq: int
    kind: EntryKind
    key: str
    true_at: str
    known_at: str
    by: str
    cause: Cause | None
    reason: str | None
    replaces: int | None
    hash: str
    canonical: bytes = field(repr=False)
    _body: dict[str, Any] | None = field(default=None, init=False, repr=False, compare=False)

    @property
    def body(self) -> dict[str, Any]:
        """The content as plain JSON values, read from the canonical bytes; not to be changed."""
        if self._body is None:
            object.__setattr__(self, "_body", parse(self.canonical)["body"])
        body: dict[str, Any] = self._body  # type: ignore[assignment]
        return body


LedgerRow = tuple[int, str, str, str, str, str, str | None, str | None, int | None, bytes, bytes]
"""One row of the ledger: the fields of `StoredEntry` in order, words as text and the hash as 32 bytes."""

ROW_FIELDS = (
    "seq",
    "kind",
    "key",
    "true_at",
    "known_at",
    "by",
    "cause",
    "reason",
    "replaces",
    "hash",
    "canonical",
)


def stored(row: LedgerRow) -> StoredEntry:
    """Return the entry of a ledger row.

    Parameters
    ----------
    row : LedgerRow
        As read from the database.

    Returns
    -------
    StoredEntry
        The same entry with the words of the vocabulary.
    """
    seq, kind, key, true_at, known_at, by, cause, reason, replaces, digest, canonical = row
    return StoredEntry(
        seq,
        EntryKind(kind),
        key,
        true_at,
        known_at,
        by,
        Cause(cause) if cause is not None else None,
        reason,
        replaces,
        bytes(digest).hex(),
        bytes(canonical),
    )


def body_head(body: bytes, by: str, key: str) -> bytes:
    """Return how the canonical bytes of an entry begin; equal beginnings mean equal body and person.

    Parameters
    ----------
    body : bytes
        Canonical bytes of the body.
    by, key : str
        Person and key of the entry.

    Returns
    -------
    bytes
        Up to and with the comma after the person.
    """
    return b'{"body":%b,"by":%b,' % (body, canonical_string(by, key=key))


def entry_bytes(entry: NewEntry, body: bytes, *, seq: int, known_at: str, previous: str) -> bytes:
    """Return the canonical bytes of an entry from those of its body.

    The names of the fields are sorted here by hand, so that a body is encoded once; the tests hold the
    result equal to the library's.

    Parameters
    ----------
    entry : NewEntry
        The entry.
    body : bytes
        Canonical bytes of its body.
    seq : int
        Its place in the ledger.
    known_at : str
        Normalised UTC date-time.
    previous : str
        Hexadecimal hash of the entry before, empty for the first.

    Returns
    -------
    bytes
        RFC 8785 bytes of the entry as a JSON object.
    """
    key = entry.key
    cause = b"null" if entry.cause is None else canonical_string(entry.cause, key=key)
    reason = b"null" if entry.reason is None else canonical_string(entry.reason, key=key)
    replaces = b"null" if entry.replaces is None else b"%d" % entry.replaces
    return (
        b'%b"cause":%b,"format":1,"key":%b,"kind":%b,"known_at":"%b","previous":"%b","reason":%b,"replaces":%b,"seq":%d,"true_at":"%b"}'
        % (
            body_head(body, entry.by, key),
            cause,
            canonical_string(key, key=key),
            canonical_string(entry.kind, key=key),
            known_at.encode(),
            previous.encode(),
            reason,
            replaces,
            seq,
            entry.true_at.encode(),
        )
    )


def entry_value(entry: NewEntry, *, seq: int, known_at: str, previous: str) -> dict[str, Any]:
    """Return the JSON object whose canonical bytes are hashed: the definition of :func:`entry_bytes`.

    Parameters
    ----------
    entry : NewEntry
        The entry.
    seq, known_at, previous
        As for :func:`entry_bytes`.

    Returns
    -------
    dict
        Plain JSON values.
    """
    return {
        "format": ENTRY_FORMAT,
        "seq": seq,
        "kind": str(entry.kind),
        "key": entry.key,
        "true_at": entry.true_at,
        "known_at": known_at,
        "by": entry.by,
        "cause": None if entry.cause is None else str(entry.cause),
        "reason": entry.reason,
        "replaces": entry.replaces,
        "body": entry.body,
        "previous": previous,
    }


def row_of(value: Mapping[str, Any], canonical: bytes, digest: bytes) -> LedgerRow:
    """Return the ledger row that canonical bytes ask for.

    Parameters
    ----------
    value : mapping
        The JSON value of the bytes.
    canonical, digest : bytes
        The bytes and their SHA-256.

    Returns
    -------
    LedgerRow
        All columns as the value states them.

    Raises
    ------
    KeyError
        When the value is no entry.
    """
    return (
        value["seq"],
        value["kind"],
        value["key"],
        value["true_at"],
        value["known_at"],
        value["by"],
        value["cause"],
        value["reason"],
        value["replaces"],
        digest,
        canonical,
    )


def body_bytes(entry: NewEntry) -> bytes:
    """Return the canonical bytes of the body of an entry.

    Parameters
    ----------
    entry : NewEntry
        The entry.

    Returns
    -------
    bytes
        RFC 8785 bytes.

    Raises
    ------
    CanonicalError
        Naming key and field, when a value has none.
    """
    body = entry.body if isinstance(entry.body, dict) else dict(entry.body)
    return canonical_bytes(body, key=entry.key)
