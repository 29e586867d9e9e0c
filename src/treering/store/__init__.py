"""The evidence store: an append-only ledger with two clocks, chained hashes and a Merkle tree.

Rules of the ledger: :mod:`treering.store.chain`. Bytes that are hashed: :mod:`treering.store.canonical`.
Proofs: :mod:`treering.store.merkle`.
"""

from treering.records.entry import NewEntry
from treering.store.entries import Head, StoredEntry
from treering.store.frames import frames_as_of
from treering.store.opening import create, open_store
from treering.store.repo import EvidenceStore
from treering.store.state import State

__all__ = [
    "EvidenceStore",
    "Head",
    "NewEntry",
    "State",
    "StoredEntry",
    "create",
    "frames_as_of",
    "open_store",
]
