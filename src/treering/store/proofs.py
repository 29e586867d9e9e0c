"""Proofs as files: what they say can be checked without the database, from a printed head alone.

An inclusion proof shows that one entry is among the first `size` of the store with a given root; a
consistency proof shows that a later head extends an earlier one, so that nothing before it was changed. Both
are JSON. The roots inside a file prove nothing by themselves: they must be compared with a head from a source
that is trusted, a page or a notice of that time.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from treering.errors import CanonicalError, ProofError
from treering.store import merkle
from treering.store.canonical import parse_canonical
from treering.store.entries import Head
from treering.store.reads import StoreReader

INCLUSION = "treering inclusion proof 1"
CONSISTENCY = "treering consistency proof 1"


@dataclass(frozen=True, slots=True)
class Inclusion:
    """What an inclusion proof that holds shows.

    Parameters
    ----------
    review : str
        Name of the review, as the file states it.
    entry : dict
        The entry as plain values.
    head : Head
        Head of the tree that it is in; to be compared with one that is trusted.
    """

    review: str
    entry: dict[str, Any]
    head: Head


@dataclass(frozen=True, slots=True)
class Consistency:
    """What a consistency proof that holds shows.

    Parameters
    ----------
    review : str
        Name of the review, as the file states it.
    first, second : Head
        The earlier and the later head; each to be compared with one that is trusted.
    """

    review: str
    first: Head
    second: Head


def inclusion_document(store: StoreReader, seq: int, size: int) -> dict[str, Any]:
    """Return the proof that an entry is among the first `size`.

    Parameters
    ----------
    store : StoreReader
        The evidence store.
    seq : int
        The entry.
    size : int
        Size of the tree, as printed with its root.

    Returns
    -------
    dict
        Plain values to be written as JSON.

    Raises
    ------
    StoreError
        When it is not among them, or there is no tree of this size.
    """
    (document,) = inclusion_documents(store, [seq], size)
    return document


def inclusion_documents(store: StoreReader, seqs: Iterable[int], size: int) -> Iterator[dict[str, Any]]:
    """Yield the proofs of several entries in one tree.

    Parameters
    ----------
    store : StoreReader
        The evidence store.
    seqs : iterable of int
        The entries.
    size : int
        Size of the tree.

    Yields
    ------
    dict
        As :func:`inclusion_document` gives it.

    Raises
    ------
    StoreError
        When an entry is not in the tree, or there is no tree of this size.
    """
    about = {"format": INCLUSION, "review": store.review, "size": size, "root": store.head(size).root}
    for seq in seqs:
        path = store.inclusion_proof(seq, size)
        (entry,) = store.entries(since=seq, until=seq + 1)
        yield {**about, "entry": entry.canonical.decode(), "seq": seq, "path": path}


def consistency_document(store: StoreReader, first: int, second: int | None = None) -> dict[str, Any]:
    """Return the proof that the head of one size extends that of a smaller one.

    Parameters
    ----------
    store : StoreReader
        The evidence store.
    first : int
        The earlier size.
    second : int, optional
        The later size; all entries by default.

    Returns
    -------
    dict
        Plain values to be written as JSON.

    Raises
    ------
    StoreError
        When the sizes are out of order or there are fewer entries.
    """
    later = store.head(second)
    path = store.consistency_proof(first, later.size)
    earlier = store.head(first)
    return {
        "format": CONSISTENCY,
        "review": store.review,
        "first": {"size": earlier.size, "root": earlier.root},
        "second": {"size": later.size, "root": later.root},
        "path": path,
    }


def read_document(data: bytes) -> dict[str, Any]:
    """Read a proof file.

    Parameters
    ----------
    data : bytes
        Its content.

    Returns
    -------
    dict
        For :func:`verify_inclusion` or :func:`verify_consistency`, told apart by ``format``.

    Raises
    ------
    ProofError
        When it is none.
    """
    try:
        value = json.loads(data)
    except (ValueError, RecursionError) as error:
        raise _unreadable(f"{error}") from error
    if not isinstance(value, dict) or value.get("format") not in (INCLUSION, CONSISTENCY):
        raise _unreadable(value.get("format") if isinstance(value, dict) else type(value).__name__)
    return value


def verify_inclusion(document: Mapping[str, Any]) -> Inclusion:
    """Check an inclusion proof; pure.

    Parameters
    ----------
    document : mapping
        As :func:`inclusion_document` gives it.

    Returns
    -------
    Inclusion
        What it shows.

    Raises
    ------
    ProofError
        When it does not hold.
    """
    canonical = _text(document, "entry").encode("utf-8", "surrogatepass")
    head, seq = _head(document), _size(document, "seq")
    try:
        entry = parse_canonical(canonical)
    except CanonicalError as error:
        raise _broken("the entry is not in canonical form", found=canonical[:80]) from error
    if not isinstance(entry, dict) or entry.get("seq") != seq:
        raise _broken("the entry bears another number", found=seq)
    leaf, root = merkle.leaf_hash(canonical), bytes.fromhex(head.root)
    if not merkle.verify_inclusion(leaf, seq, head.size, _path(document), root):
        raise _broken(f"entry {seq} is not in the tree of {head.size} entries", found=head.root)
    return Inclusion(_text(document, "review"), entry, head)


def verify_consistency(document: Mapping[str, Any]) -> Consistency:
    """Check a consistency proof; pure.

    Parameters
    ----------
    document : mapping
        As :func:`consistency_document` gives it.

    Returns
    -------
    Consistency
        What it shows.

    Raises
    ------
    ProofError
        When it does not hold.
    """
    first, second = (_head(_part(document, name)) for name in ("first", "second"))
    roots = bytes.fromhex(first.root), bytes.fromhex(second.root)
    if not merkle.verify_consistency(first.size, second.size, *roots, _path(document)):
        raise _broken(
            f"the tree of {second.size} entries does not extend that of {first.size}", found=second.root
        )
    return Consistency(_text(document, "review"), first, second)


def _part(document: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    value = document.get(name)
    if not isinstance(value, Mapping):
        raise _unreadable(f"no {name}")
    return value


def _text(document: Mapping[str, Any], name: str) -> str:
    value = document.get(name)
    if not isinstance(value, str):
        raise _unreadable(f"no text {name}")
    return value


def _size(document: Mapping[str, Any], name: str) -> int:
    value = document.get(name)
    if not isinstance(value, int) or isinstance(value, bool) or value < 0:
        raise _unreadable(f"no whole number {name}")
    return value


def _hash(value: Any) -> bytes:
    try:
        digest = bytes.fromhex(value)
    except (ValueError, TypeError) as error:
        raise _unreadable(f"{value!r} in place of a hash") from error
    if len(digest) != 32:
        raise _unreadable(f"{value!r} in place of a hash")
    return digest


def _head(document: Mapping[str, Any]) -> Head:
    return Head(_size(document, "size"), _hash(document.get("root")).hex())


def _path(document: Mapping[str, Any]) -> list[bytes]:
    path = document.get("path")
    if not isinstance(path, list):
        raise _unreadable("no list path")
    return [_hash(step) for step in path]


def _unreadable(found: object) -> ProofError:
    return ProofError(
        "This is no proof of an evidence store.",
        found=found,
        expected=f"JSON with format {INCLUSION!r} or {CONSISTENCY!r}",
        next_step="Make one with treering store prove or prove-extends.",
    )


def _broken(text: str, *, found: object) -> ProofError:
    return ProofError(
        f"The proof does not hold: {text}.",
        found=found,
        next_step="The file or the store it comes from was altered: ask for a new one and audit the store.",
    )
