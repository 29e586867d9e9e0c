"""What an append will lay down: the entries of one batch turned into rows, before any of them is written.

Pure: it sees the tail of the ledger and the last entry on each key, and either returns all rows or raises.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, MutableMapping
from dataclasses import dataclass, field, replace
from hashlib import sha256
from typing import Any

from treering.errors import StoreError
from treering.records.entry import NewEntry
from treering.store import chain
from treering.store.canonical import parse
from treering.store.chain import Tip
from treering.store.entries import LedgerRow, body_bytes, body_head, entry_bytes
from treering.store.merkle import Frontier, leaf_hash
from treering.store.projection import check_key, project
from treering.terms import EntryKind

KEPT_LEVEL = 8
"""Inner nodes of the Merkle tree are stored from this level upwards: one row for 128 entries."""


@dataclass(slots=True)
class Tail:
    """The end of the ledger: all that the next entry depends on.

    Parameters
    ----------
    frontier : Frontier
        Of the Merkle tree; its size is the number of entries.
    hash : str
        Hexadecimal hash of the last entry, empty when there is none.
    known_at : str
        When the last entry became known, empty when there is none.
    last_version : int
        Number of the last version, 0 when there is none.
    """

    frontier: Frontier = field(default_factory=Frontier)
    hash: str = ""
    known_at: str = ""
    last_version: int = 0

    @property
    def size(self) -> int:
        """Number of entries."""
        return self.frontier.size

    def copy(self) -> Tail:
        """Return an independent copy.

        Returns
        -------
        Tail
            Equal to this one.
        """
        return replace(self, frontier=self.frontier.copy())


@dataclass(slots=True)
class Batch:
    """Rows ready to be written.

    Parameters
    ----------
    ledger : list of LedgerRow
        Rows of the ledger.
    typed : dict
        Kind to rows of its typed table.
    nodes : list of (level, position, hash)
        Inner nodes of the tree to keep.
    """

    ledger: list[LedgerRow] = field(default_factory=list)
    typed: dict[EntryKind, list[tuple[Any, ...]]] = field(default_factory=dict)
    nodes: list[tuple[int, int, bytes]] = field(default_factory=list)


def plan(entries: Iterable[NewEntry], *, known_at: str, tail: Tail, tips: MutableMapping[str, Tip]) -> Batch:
    """Turn entries into rows.

    Parameters
    ----------
    entries : iterable of NewEntry
        In the order in which they are laid down.
    known_at : str
        Normalised date-time of the run.
    tail : Tail
        End of the ledger; moved forward.
    tips : mutable mapping of key to Tip
        Last entry on each key of the batch; kept up to date.

    Returns
    -------
    Batch
        Without the entries that equal the last one on their key.

    Raises
    ------
    StoreError
        When an entry breaks a rule of :mod:`treering.store.chain`, or a value cannot be stored.
    """
    batch = Batch()
    for given in entries:
        _check_form(given)
        tip = tips.get(given.key)
        entry = _with_head(given, tail) if given.kind == EntryKind.VERSION and tip is None else given
        body = body_bytes(entry)
        if tip is not None and _is_repeat(entry, body, tip):
            continue
        _check_place(entry, tip, known_at, tail)
        _lay_down(entry, body, known_at, tail, tips, batch)
    return batch


def provisional(
    entries: Iterable[NewEntry], *, known_at: str, size: int, tips: MutableMapping[str, Tip]
) -> list[LedgerRow]:
    """Turn entries into rows as they would lie in the ledger, without hashes, for a look ahead.

    Parameters
    ----------
    entries : iterable of NewEntry
        In the order in which they would be laid down.
    known_at : str
        When they would become known.
    size : int
        Number of entries before them.
    tips : mutable mapping of key to Tip
        Last entry on each key; kept up to date.

    Returns
    -------
    list of LedgerRow
        Without the entries that repeat the last one on their key; hash empty.

    Raises
    ------
    StoreError
        When an entry replaces what it may not, or a value cannot be stored.
    """
    rows: list[LedgerRow] = []
    for entry in entries:
        _check_form(entry)
        tip = tips.get(entry.key)
        body = body_bytes(entry)
        if tip is not None and _is_repeat(entry, body, tip):
            continue
        chain.check_replacement(entry, tip)
        seq = size + len(rows)
        project(entry.kind, seq, entry.body, key=entry.key)
        canonical = entry_bytes(entry, body, seq=seq, known_at=known_at, previous="")
        rows.append(_row(entry, seq, known_at, b"", canonical))
        tips[entry.key] = Tip(seq, str(entry.kind), entry.true_at, canonical)
    return rows


def _check_form(entry: NewEntry) -> None:
    """Check what can be told from the entry alone."""
    check_key(entry.kind, entry.key)
    chain.true_date(entry.true_at, key=entry.key)
    for name, text in (("by", entry.by), ("reason", entry.reason)):
        absent = text is None and name == "reason"
        if not absent and (not isinstance(text, str) or "\x00" in text):
            raise StoreError(
                f"{entry.kind} {entry.key}: {name} must be text.",
                found=repr(text),
                next_step="Correct it and append again; nothing was stored.",
            )


def _check_place(entry: NewEntry, tip: Tip | None, known_at: str, tail: Tail) -> None:
    """Check that the entry may follow what is there."""
    chain.check_known(known_at, tail.known_at)
    if tip is not None and tip.kind == EntryKind.VERSION:
        chain.check_unversioned(entry)
    if entry.kind == EntryKind.VERSION:
        chain.check_version(entry, last=tail.last_version, size=tail.size, root=tail.frontier.root().hex())
    chain.check_replacement(entry, tip)


def _lay_down(
    entry: NewEntry, body: bytes, known_at: str, tail: Tail, tips: MutableMapping[str, Tip], batch: Batch
) -> None:
    """Add the rows of one entry and move the tail over it."""
    seq = tail.frontier.size
    canonical = entry_bytes(entry, body, seq=seq, known_at=known_at, previous=tail.hash)
    digest = sha256(canonical).digest()
    batch.ledger.append(_row(entry, seq, known_at, digest, canonical))
    row = project(entry.kind, seq, entry.body, key=entry.key)
    batch.typed.setdefault(entry.kind, []).append(row)
    batch.nodes += [node for node in tail.frontier.add(leaf_hash(canonical)) if node[0] >= KEPT_LEVEL]
    tail.hash, tail.known_at = digest.hex(), known_at
    if entry.kind == EntryKind.VERSION:
        tail.last_version += 1
    tips[entry.key] = Tip(seq, str(entry.kind), entry.true_at, canonical)


def _row(entry: NewEntry, seq: int, known_at: str, digest: bytes, canonical: bytes) -> LedgerRow:
    return (
        seq,
        str(entry.kind),
        entry.key,
        entry.true_at,
        known_at,
        str(entry.by),
        None if entry.cause is None else str(entry.cause),
        entry.reason,
        entry.replaces,
        digest,
        canonical,
    )


def _is_repeat(entry: NewEntry, body: bytes, tip: Tip) -> bool:
    """Tell whether the entry says what the last one on its key says already."""
    same = tip.kind == entry.kind and tip.true_at == entry.true_at
    if same and entry.kind == EntryKind.VERSION:
        return _is_repeated_version(entry, tip)
    return same and tip.canonical.startswith(body_head(body, entry.by, entry.key))


def _is_repeated_version(entry: NewEntry, tip: Tip) -> bool:
    # A version may be given without size and root, which the store fills in; those of the one laid down
    # before count then.
    stored = _tip_body(tip)
    stated = {name: entry.body.get(name) for name in ("entries", "root")}
    if any(value is not None and value != stored[name] for name, value in stated.items()):
        return False
    filled = replace(entry, body={**entry.body, "entries": stored["entries"], "root": stored["root"]})
    return tip.canonical.startswith(body_head(body_bytes(filled), entry.by, entry.key))


def _tip_body(tip: Tip) -> Mapping[str, Any]:
    body: Mapping[str, Any] = parse(tip.canonical)["body"]
    return body


def _with_head(entry: NewEntry, tail: Tail) -> NewEntry:
    """Fill in size and root of the tree before a version where it leaves both out."""
    if entry.body.get("entries") is None and entry.body.get("root") is None:
        head = {"entries": tail.size, "root": tail.frontier.root().hex()}
        return replace(entry, body={**entry.body, **head})
    return entry
