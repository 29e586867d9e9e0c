"""The rules of the ledger, as pure functions over plain rows.

1. Entries are numbered from 0 without a gap (`EntryGapError`).
2. The hash of an entry is the SHA-256 of its canonical bytes (`EntryHashError`).
3. Each entry holds the hash of the one before, the first an empty text (`BrokenLinkError`).
4. Nothing is updated or deleted. A correction is a new entry of the same kind and key that names the live
   entry it replaces; a withdrawal is an entry of its own kind on the key of what it withdraws. A key has at
   most one live entry, and after a withdrawal it is free (`ReplacementError`).
5. The date an entry became known never goes back (`KnownDateError`).
6. Versions are numbered from 1 without a gap and are neither replaced nor withdrawn (`VersionGapError`).
7. A version states size and root of the Merkle tree over all entries before its own (`TreeHeadError`).

Rules 1 to 3 are checked from the canonical bytes alone, so that a column altered in the database cannot
stand in for them. Entry 3 of a store, for example, must be numbered 3 inside its bytes, these bytes must
hash to what is stored, and the bytes must name the hash of entry 2.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import UTC, date, datetime
from hashlib import sha256
from typing import Any

from treering.errors import (
    BrokenLinkError,
    EntryGapError,
    EntryHashError,
    KnownDateError,
    ReplacementError,
    StoreError,
    TreeHeadError,
    VersionGapError,
)
from treering.records.entry import NewEntry
from treering.terms import EntryKind

ChainRow = tuple[int, bytes, bytes]
"""Sequence number, canonical bytes and hash of one entry."""

_DAMAGED = "The ledger was altered outside treering: compare it with a copy and with a printed head."
_PREVIOUS = b',"previous":"'
_SEQ = b',"seq":'
_USUAL_END = b',"previous":"%b","reason":null,"replaces":null,"seq":%d,"true_at":"'
_DATE_LENGTH = len('2021-03-01"}')


@dataclass(frozen=True, slots=True)
class Tip:
    """The last entry on a key.

    Parameters
    ----------
    seq : int
        Its place in the ledger.
    kind, true_at : str
        As stored.
    canonical : bytes
        Canonical bytes.
    """

    seq: int
    kind: str
    true_at: str
    canonical: bytes


def check_links(rows: Iterable[ChainRow], *, size: int = 0, previous: str = "") -> tuple[int, str]:
    """Check rules 1 to 3 over a stretch of the ledger.

    Parameters
    ----------
    rows : iterable of (seq, canonical bytes, hash)
        Entries in order.
    size : int, optional
        Entries before the stretch.
    previous : str, optional
        Hexadecimal hash of the entry before the stretch.

    Returns
    -------
    tuple of (int, str)
        Entries up to the end of the stretch, and the hexadecimal hash of its last one.

    Raises
    ------
    EntryGapError, EntryHashError, BrokenLinkError
        At the first entry that breaks a rule.
    """
    for seq, canonical, digest in rows:
        # Most entries end alike, and one comparison of the end covers number and link.
        usual = b',"previous":"%b","reason":null,"replaces":null,"seq":%d,"true_at":"' % (
            previous.encode(),
            size,
        )
        if seq != size or not canonical.endswith(usual, 0, -_DATE_LENGTH):
            _check_place(seq, canonical, size, previous)
        if sha256(canonical).digest() != digest:
            raise EntryHashError(
                f"The bytes of entry {seq} do not give its hash.",
                found=sha256(canonical).hexdigest(),
                expected=bytes(digest).hex(),
                next_step=_DAMAGED,
            )
        size, previous = size + 1, digest.hex()
    return size, previous


def _check_place(seq: int, canonical: bytes, size: int, previous: str) -> None:
    """Check the number of an entry and its link to the one before."""
    stated = stated_seq(canonical)
    if seq != size or stated != size:
        raise EntryGapError(
            f"Entry {size} is missing or out of order.",
            found=seq if seq != size else f"{stated} inside the bytes of entry {seq}",
            expected=size,
            next_step=_DAMAGED,
        )
    if stated_previous(canonical) != previous:
        raise BrokenLinkError(
            f"Entry {seq} does not follow the entry before it.",
            found=stated_previous(canonical) or "no hash",
            expected=previous or "no hash",
            next_step=_DAMAGED,
        )


def stated_previous(canonical: bytes) -> str:
    """Return the hash of the entry before, as stated in canonical bytes.

    Parameters
    ----------
    canonical : bytes
        Canonical bytes of an entry.

    Returns
    -------
    str
        Hexadecimal, empty for the first entry and for bytes that state none.
    """
    # Keys are sorted and quotation marks inside strings are escaped, so the last match is the entry's own
    # field: only strings and numbers follow it. Found this way, no JSON needs to be parsed.
    start = canonical.rfind(_PREVIOUS)
    if start < 0:
        return ""
    start += len(_PREVIOUS)
    return canonical[start : canonical.find(b'"', start)].decode("ascii", "replace")


def stated_seq(canonical: bytes) -> int:
    """Return the sequence number stated in canonical bytes.

    Parameters
    ----------
    canonical : bytes
        Canonical bytes of an entry.

    Returns
    -------
    int
        The number, -1 when there is none.
    """
    start = canonical.rfind(_SEQ)
    number = canonical[start + len(_SEQ) : canonical.find(b",", start + 1)]
    return int(number) if start >= 0 and number.isdigit() else -1


def check_replacement(entry: NewEntry, tip: Tip | None) -> None:
    """Check rule 4 for an entry about to be laid down.

    Parameters
    ----------
    entry : NewEntry
        The entry.
    tip : Tip or None
        The last entry on its key.

    Raises
    ------
    ReplacementError
        Saying which entry is live.
    """
    free = tip is None or tip.kind == EntryKind.WITHDRAWAL
    if entry.kind == EntryKind.WITHDRAWAL and free:
        raise _refused(entry, "withdraws a key without a live entry", entry.replaces, "a live entry", None)
    if entry.replaces is None and free:
        return
    if tip is None or entry.replaces != tip.seq:
        text = "already has a live entry" if entry.replaces is None else "names an entry that is not live"
        raise _refused(entry, text, entry.replaces, tip.seq if tip else None, tip)
    if not free and entry.kind not in (tip.kind, EntryKind.WITHDRAWAL):
        raise _refused(entry, "replaces an entry of another kind", str(entry.kind), tip.kind, tip)


def _refused(
    entry: NewEntry, text: str, found: object, expected: object, tip: Tip | None
) -> ReplacementError:
    step = (
        f"Read the live entry {tip.seq} and name it in replaces if it is to be corrected."
        if tip and tip.kind != EntryKind.WITHDRAWAL
        else "Leave replaces empty: nothing is live on this key."
    )
    return ReplacementError(
        f"{entry.kind} {entry.key} {text}.", found=found, expected=expected, next_step=step
    )


def check_version(entry: NewEntry, *, last: int, size: int, root: str) -> None:
    """Check rules 6 and 7 for a version about to be laid down.

    Parameters
    ----------
    entry : NewEntry
        An entry of kind version.
    last : int
        Number of the last version, 0 when there is none.
    size, root : int and str
        Head of the ledger before the entry.

    Raises
    ------
    VersionGapError, TreeHeadError
        Naming what is stated and what is right.
    """
    body: Mapping[str, Any] = entry.body
    if body.get("version") != last + 1 or entry.key != f"version/{last + 1}":
        raise VersionGapError(
            f"{entry.key} cannot be laid down after version {last}.",
            found=body.get("version"),
            expected=last + 1,
            next_step="Versions are numbered in order and never replaced; lay down the next one.",
        )
    if body.get("entries") != size or body.get("root") != root:
        raise TreeHeadError(
            f"{entry.key} does not state the head of the ledger before it.",
            version=last + 1,
            found=f"{body.get('entries')} entries, root {body.get('root')}",
            expected=f"{size} entries, root {root}",
            next_step="Leave entries and root out, or read the head again and lay the version down after it.",
        )


def check_unversioned(entry: NewEntry) -> None:
    """Refuse an entry on the key of a version, whatever it says.

    Parameters
    ----------
    entry : NewEntry
        An entry whose key already holds a version.

    Raises
    ------
    VersionGapError
        Always.
    """
    raise VersionGapError(
        f"{entry.key} is laid down for good.",
        found=f"a {entry.kind} on its key",
        expected="a new version",
        next_step="A version is never replaced or withdrawn; lay down the next one.",
    )


def check_known(known_at: str, last: str) -> None:
    """Check rule 5.

    Parameters
    ----------
    known_at, last : str
        Normalised UTC date-times of a new entry and of the last one, empty when there is none.

    Raises
    ------
    KnownDateError
        When the clock went back.
    """
    if known_at < last:
        raise KnownDateError(
            "The run is dated earlier than the last entry of the store.",
            found=known_at,
            expected=f"{last} or later",
            next_step="Set the clock right and run again; what is known is never dated back. "
            "If the last run was dated ahead by mistake, date this one like it.",
        )


def known_time(value: str | datetime) -> str:
    """Return a date-time in the one form that is stored and compared, ``2026-05-04T06:00:00Z``.

    Parameters
    ----------
    value : str or datetime
        ISO date-time with an offset, or an aware datetime; fractions of a second are cut.

    Returns
    -------
    str
        UTC to the second.

    Raises
    ------
    StoreError
        When it is no date-time or names no offset.
    """
    try:
        moment = datetime.fromisoformat(value) if isinstance(value, str) else value
    except ValueError:
        moment = None
    if moment is None or moment.tzinfo is None:
        raise StoreError(
            "The time of a run must be a date-time with its offset from UTC.",
            found=value,
            expected="such as 2026-05-04T06:00:00Z",
            next_step="Pass the start of the run in UTC.",
        )
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def true_date(value: str, *, key: str | None = None) -> str:
    """Return an ISO date unchanged after checking it.

    Parameters
    ----------
    value : str
        Date as YYYY-MM-DD.
    key : str, optional
        Entry it belongs to.

    Returns
    -------
    str
        The same text.

    Raises
    ------
    StoreError
        When it is no such date.
    """
    try:
        if date.fromisoformat(value).isoformat() == value:
            return value
    except (ValueError, TypeError):
        pass  # reported below, together with dates in another ISO form
    raise StoreError(
        f"{f'entry {key}: ' if key else ''}the date is not an ISO date.",
        found=value,
        expected="YYYY-MM-DD",
        next_step="Write the full date at which it was true in the world.",
    )
