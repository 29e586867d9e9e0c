"""Queries on the ledger, all in terms of plain rows; shared by reading, appending and copying."""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator, Sequence
from typing import Any

from sqlalchemy import Connection, Engine, select

from treering.errors import StoreError
from treering.store.chain import ChainRow, Tip
from treering.store.connection import reading
from treering.store.entries import ROW_FIELDS, LedgerRow
from treering.store.merkle import Node, frontier, leaf_hash, node_hash
from treering.store.models import METADATA, TABLES
from treering.store.plan import KEPT_LEVEL, Batch, Tail
from treering.terms import EntryKind

_CHUNK = 5000
_TYPED_CHUNK = 100_000
_COLUMNS = ", ".join(f'"{name}"' for name in ROW_FIELDS)
_TIPS = {
    "sqlite": "SELECT seq, kind, key, true_at, canonical FROM entry WHERE seq IN "
    "(SELECT max(seq) FROM entry WHERE key IN (SELECT value FROM json_each(?)) GROUP BY key)",
    "postgresql": "SELECT seq, kind, key, true_at, canonical FROM entry WHERE seq IN "
    "(SELECT max(seq) FROM entry WHERE key = ANY(%s) GROUP BY key)",
}


def fetch(connection: Connection, query: str, *values: Any) -> list[tuple[Any, ...]]:
    """Run a query with ``?`` for each value and return plain tuples.

    Parameters
    ----------
    connection : Connection
        Inside a transaction.
    query : str
        SQL that both databases understand.
    *values
        For the question marks, in order.

    Returns
    -------
    list of tuple
        All rows. The driver's own tuples: SQLAlchemy's would cost as much again on large reads.
    """
    if connection.dialect.name == "postgresql":
        query = query.replace("?", "%s")
    result = connection.exec_driver_sql(query, tuple(values))
    rows: list[Any] = list(result.cursor.fetchall()) if result.cursor else []
    result.close()
    return rows


def size_of(connection: Connection) -> int:
    """Return the number of entries.

    Parameters
    ----------
    connection : Connection
        Inside a transaction.

    Returns
    -------
    int
        One more than the last sequence number.
    """
    return int(fetch(connection, "SELECT coalesce(max(seq), -1) + 1 FROM entry")[0][0])


def ledger_rows(engine: Engine, since: int, until: int) -> Iterator[LedgerRow]:
    """Yield ledger rows, a few thousand at a time.

    Each chunk is a transaction of its own: entries never change, so they fit together, and a slow caller
    holds up nobody.

    Parameters
    ----------
    engine : Engine
        Engine of the store.
    since, until : int
        First sequence number, and the one after the last.

    Yields
    ------
    LedgerRow
        In order.
    """
    query = f"SELECT {_COLUMNS} FROM entry WHERE seq >= ? AND seq < ? ORDER BY seq"
    for start in range(since, until, _CHUNK):
        with reading(engine) as connection:
            rows = fetch(connection, query, start, min(start + _CHUNK, until))
        yield from rows


def chain_rows(engine: Engine, since: int, until: int) -> Iterator[ChainRow]:
    """Yield what the chain rules need of each entry.

    Parameters
    ----------
    engine, since, until
        As for :func:`ledger_rows`.

    Yields
    ------
    tuple of (seq, canonical bytes, hash)
        In order.
    """
    query = "SELECT seq, canonical, hash FROM entry WHERE seq >= ? AND seq < ? ORDER BY seq"
    for start in range(since, until, _CHUNK):
        with reading(engine) as connection:
            rows = fetch(connection, query, start, min(start + _CHUNK, until))
        yield from rows


def typed_rows(engine: Engine, kind: EntryKind, since: int, until: int) -> Iterator[dict[str, Any]]:
    """Yield the rows of a typed table.

    Parameters
    ----------
    engine : Engine
        Engine of the store.
    kind : EntryKind
        Kind of entry.
    since, until : int
        First sequence number, and the one after the last.

    Yields
    ------
    dict
        Column to value, in the order of the ledger.
    """
    table = METADATA.tables[str(TABLES[kind].__tablename__)]
    for start in range(since, until, _TYPED_CHUNK):
        stop = min(start + _TYPED_CHUNK, until)
        query = select(table).where(table.c.entry >= start, table.c.entry < stop).order_by(table.c.entry)
        with reading(engine) as connection:
            rows = connection.execute(query).mappings().all()
        yield from (dict(row) for row in rows)


def rows_as_of(connection: Connection, size: int, known: str, true: str) -> list[LedgerRow]:
    """Return the rows of one moment.

    Parameters
    ----------
    connection : Connection
        Inside a transaction.
    size : int
        Entries with a smaller sequence number count.
    known : str
        Entries known by then count; empty for no limit.
    true : str
        Entries true by this date count; empty for no limit.

    Returns
    -------
    list of LedgerRow
        In order.
    """
    query, values = f"SELECT {_COLUMNS} FROM entry WHERE seq < ?", [size]
    limits: list[Any] = []
    for column, limit in (("known_at", known), ("true_at", true)):
        if limit:
            query += f" AND {column} <= ?"
            limits.append(limit)
    return fetch(connection, query + " ORDER BY seq", *values, *limits)


def tips_of(connection: Connection, keys: Sequence[str]) -> dict[str, Tip]:
    """Return the last entry on each of some keys.

    Parameters
    ----------
    connection : Connection
        Inside a transaction.
    keys : sequence of str
        Keys looked for.

    Returns
    -------
    dict of str to Tip
        Without the keys that are new.
    """
    if not keys:
        return {}
    dialect = connection.dialect.name
    value = json.dumps(list(keys)) if dialect == "sqlite" else list(keys)
    rows = fetch(connection, _TIPS[dialect], value)
    return {key: Tip(seq, kind, true_at, bytes(canonical)) for seq, kind, key, true_at, canonical in rows}


def node_reader(connection: Connection) -> Node:
    """Return the node function of the store's Merkle tree.

    Parameters
    ----------
    connection : Connection
        Inside a transaction.

    Returns
    -------
    callable
        Level and index to hash; nodes below the stored levels are computed from the entries.
    """
    kept: dict[tuple[int, int], bytes] = {}
    tiles: dict[int, list[bytes]] = {}

    def leaves(tile: int) -> list[bytes]:
        if tile not in tiles:
            first = tile << KEPT_LEVEL
            query = "SELECT canonical FROM entry WHERE seq >= ? AND seq < ? ORDER BY seq"
            rows = fetch(connection, query, first, first + (1 << KEPT_LEVEL))
            tiles[tile] = [leaf_hash(row[0]) for row in rows]
        return tiles[tile]

    def node(level: int, index: int) -> bytes:
        if (level, index) in kept:
            return kept[level, index]
        if level >= KEPT_LEVEL:
            query = "SELECT hash FROM tree_node WHERE level = ? AND position = ?"
            found = fetch(connection, query, level, index)
            if not found:
                raise StoreError(
                    f"Node {index} of level {level} of the Merkle tree is missing.",
                    next_step="The store was altered outside treering: run treering audit.",
                )
            kept[level, index] = bytes(found[0][0])
        elif level == 0:
            return leaves(index >> KEPT_LEVEL)[index & ((1 << KEPT_LEVEL) - 1)]
        else:
            kept[level, index] = node_hash(node(level - 1, 2 * index), node(level - 1, 2 * index + 1))
        return kept[level, index]

    return node


def read_tail(connection: Connection, cached: Tail | None) -> Tail:
    """Return the end of the ledger.

    Parameters
    ----------
    connection : Connection
        Inside the transaction that will write.
    cached : Tail or None
        What this process believes it to be; used when still true.

    Returns
    -------
    Tail
        A copy that may be moved forward.
    """
    last = fetch(connection, "SELECT seq, hash, known_at FROM entry ORDER BY seq DESC LIMIT 1")
    if not last:
        return Tail()
    size, digest, known_at = last[0][0] + 1, bytes(last[0][1]).hex(), last[0][2]
    if cached is not None and cached.size == size and cached.hash == digest:
        return cached.copy()
    version = fetch(connection, "SELECT coalesce(max(version), 0) FROM version")[0][0]
    return Tail(frontier(size, node_reader(connection)), digest, known_at, int(version))


def write_batch(connection: Connection, batch: Batch, statements: dict[str, str]) -> None:
    """Write the rows of a batch.

    Parameters
    ----------
    connection : Connection
        Inside the writing transaction.
    batch : Batch
        Rows to write.
    statements : dict of str to str
        INSERT statement of each table.
    """
    groups: list[tuple[str, Iterable[tuple[Any, ...]]]] = [("entry", batch.ledger)]
    groups += [(str(TABLES[kind].__tablename__), rows) for kind, rows in batch.typed.items()]
    groups.append(("tree_node", batch.nodes))
    for table, rows in groups:
        if rows:
            connection.exec_driver_sql(statements[table], rows)  # type: ignore[arg-type]
