"""The audit of a store: numbered checks, each fault told with its entry, its version and the next step.

1. The schema is that of the migrations, and its triggers are in force.
2. Entries are numbered from 0 without a gap.
3. The hash of each entry is that of its canonical bytes.
4. Each entry names the hash of the one before.
5. Columns and typed tables say what the canonical bytes say.
6. Each version states the head of the Merkle tree over the entries before it; the kept nodes are right.
7. What an entry replaces or names is there; a key has one live entry; the clock never went back.
8. Nobody holds two of the roles on one trial and outcome; verifications rest on real readings.
9. Analyses, looks and pages belong to versions that are stored.
10. Heads printed in the past are heads of this store.

A chain alone cannot show a cut tail or a history written anew from end to end: whoever can write to the
database can compute all hashes again. Check 10 shows both, from any head that left the house.

Nothing is written: the connections refuse to. The ledger is read a page at a time, so that memory does not
grow with it.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path

from sqlalchemy import Engine

from treering.errors import StoreError
from treering.store import comparing, reader
from treering.store.audit_chain import ChainPass, chain_of, pages
from treering.store.audit_roles import check_roles
from treering.store.audit_rules import check_references, check_versions
from treering.store.audit_schema import audit_engine, check_schema
from treering.store.audit_tree import TreePass
from treering.store.checkpoint import Checkpoint
from treering.store.checks import RESTORE, Check, Findings, undecodable
from treering.store.connection import place_of, reading, store_url
from treering.store.entries import LedgerRow

NEEDS_TABLES = range(2, 11)
"""Checks that cannot be made on a database without the tables of a store."""


def audit_store(
    target: str | Path, *, review: str | None = None, checkpoints: Iterable[Checkpoint] = ()
) -> list[Check]:
    """Check a store from end to end; nothing is made, migrated or changed.

    Parameters
    ----------
    target : str or Path
        Path of a SQLite file or a PostgreSQL URL.
    review : str, optional
        Name of the review it must belong to.
    checkpoints : iterable of Checkpoint, optional
        Heads printed in the past.

    Returns
    -------
    list of Check
        Checks 1 to 10 in order; only check 1 when the tables are not those of a store.

    Raises
    ------
    StoreError
        When there is no database at the place.
    """
    url, points = store_url(target), list(checkpoints)
    if url.get_backend_name() == "sqlite" and not Path(str(url.database)).is_file():
        raise StoreError(
            "There is no evidence store here.",
            file=place_of(url),
            next_step="Correct the place, or run treering update once.",
        )
    for lenient in (False, True):
        engine = audit_engine(url, lenient=lenient)
        try:
            return _audit(engine, review, points)
        except StoreError as error:
            if lenient or not undecodable(error):
                raise
            # A text was altered to bytes that are no UTF-8: read again in a way that does not stop at it.
        finally:
            engine.dispose()
    raise AssertionError("unreachable")


def _audit(engine: Engine, review: str | None, checkpoints: Sequence[Checkpoint]) -> list[Check]:
    findings = Findings()
    if not check_schema(engine, findings, review=review):
        return findings.checks()
    with findings.guarded(2):
        with reading(engine) as connection:
            limit = reader.size_of(connection)
            rows = reader.fetch(connection, "SELECT level, position, hash FROM tree_node")
        nodes = {(level, position): made for level, position, made in rows}
        chain, tree = ChainPass(findings), TreePass(findings, nodes, checkpoints)
        with findings.guarded(5):
            _walk(engine, limit, chain, tree, findings)
        chain.finish()
        tree.finish()
        with findings.guarded(7), reading(engine) as connection:
            check_references(connection, findings)
        with findings.guarded(8), reading(engine) as connection:
            check_roles(connection, findings)
        with findings.guarded(9), reading(engine) as connection:
            check_versions(connection, findings)
        return findings.checks(tree.versions)
    return findings.checks()


def _walk(engine: Engine, limit: int, chain: ChainPass, tree: TreePass, findings: Findings) -> None:
    """Read the ledger page by page, and compare the tables with each page."""
    for page in pages(engine, limit):
        bare = chain_of(page)
        chain.links(bare)
        chain.clock(page)
        tree.grow(bare)
        for rows in _runs(page):
            for found in comparing.row_differences(engine, rows, rows[0][0], rows[-1][0] + 1):
                findings.add(
                    5,
                    f"{found.table}.{found.column} is not what its canonical bytes say.",
                    seq=found.seq,
                    found="nothing" if found.found is None else found.found,
                    expected="nothing" if found.expected is None else found.expected,
                    step=RESTORE,
                )
    findings.seen[5] = f"{chain.count} entries"


def _runs(page: Sequence[LedgerRow]) -> Iterator[Sequence[LedgerRow]]:
    """Yield each stretch of rows without a gap in their numbers."""
    if page[-1][0] - page[0][0] == len(page) - 1:
        yield page
        return
    first = 0
    for place in range(1, len(page)):
        if page[place][0] != page[place - 1][0] + 1:
            yield page[first:place]
            first = place
    yield page[first:]
