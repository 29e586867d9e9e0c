"""Checks 7 and 9: what entries replace and name is there, and every page has its version.

They read the columns; that these say what the canonical bytes say is check 5.
"""

from __future__ import annotations

from typing import Any

from sqlalchemy import Connection

from treering.store.checks import COMPARE, RESTORE, Findings
from treering.store.models import KEY_PREFIXES, METADATA, TABLES
from treering.store.reader import fetch
from treering.terms import EntryKind

_MOST = 100  # rows read of one query; more faults than this say nothing more

# Only keys with several entries need the order of these; the index on keys finds them without the ledger.
_LIVE_RULE = """
SELECT seq, kind, key, replaces, before, kind_before FROM (
  SELECT seq, kind, key, replaces,
         lag(seq) OVER (PARTITION BY key ORDER BY seq) AS before,
         lag(kind) OVER (PARTITION BY key ORDER BY seq) AS kind_before
  FROM entry WHERE key IN (SELECT key FROM entry GROUP BY key HAVING count(*) > 1)) AS ordered
WHERE before IS NOT NULL AND CASE
  WHEN kind_before = 'withdrawal' THEN kind = 'withdrawal' OR replaces <> before
  ELSE replaces IS NULL OR replaces <> before OR kind_before = 'version'
       OR kind NOT IN (kind_before, 'withdrawal')
END ORDER BY seq"""

_FIRST_RULE = """
SELECT seq, kind, key, replaces, NULL, NULL FROM entry e
WHERE (replaces IS NOT NULL OR seq IN (SELECT entry FROM withdrawal))
AND NOT EXISTS (SELECT 1 FROM entry b WHERE b.key = e.key AND b.seq < e.seq) ORDER BY seq"""


def check_references(connection: Connection, findings: Findings) -> None:
    """Check the rule of live entries, keys, and what entries name (check 7).

    Parameters
    ----------
    connection : Connection
        Inside a reading transaction.
    findings : Findings
        Where faults are noted.
    """
    for seq, kind, key, replaces, before, kind_before in [
        *_some(connection, _LIVE_RULE),
        *_some(connection, _FIRST_RULE),
    ]:
        found = f"{kind} {key} that replaces {'nothing' if replaces is None else f'entry {replaces}'}"
        expected = f"after {kind_before} in entry {before}" if before is not None else "the first on its key"
        findings.add(
            7, "it breaks the rule of one live entry on a key.", seq=seq, found=found, expected=expected
        )
    for seq, kind, key in _some(connection, _key_query()):
        findings.add(7, "its key is not of its kind.", seq=seq, found=f"{kind} {key}")
    for kind in EntryKind:
        table = str(TABLES[kind].__tablename__)
        query = f'SELECT entry FROM "{table}" t WHERE NOT EXISTS (SELECT 1 FROM entry WHERE seq = t.entry)'
        for (seq,) in _some(connection, f"{query} ORDER BY entry"):
            findings.add(
                7, f"table {table} has a row for it, but there is no such entry.", seq=seq, step=RESTORE
            )
    _check_names(connection, findings)
    findings.seen[7] = "replacements, dates, keys, names"


def _check_names(connection: Connection, findings: Findings) -> None:
    """Check that an entry stands on the keys that others name, laid down before them."""
    for kind, field, named in (
        (EntryKind.RESULT, "verification", EntryKind.VERIFICATION),
        (EntryKind.DELIVERY, "notice", EntryKind.NOTICE),
        (EntryKind.ACKNOWLEDGEMENT, "notice", EntryKind.NOTICE),
    ):
        query = (
            f'SELECT entry, t."{field}" FROM "{TABLES[kind].__tablename__}" t WHERE t."{field}" IS NOT NULL '
            f'AND NOT EXISTS (SELECT 1 FROM entry e WHERE e.key = t."{field}" AND e.seq < t.entry '
            f"AND e.kind = '{named}') ORDER BY entry"
        )
        for seq, key in _some(connection, query):
            findings.add(7, f"the {kind} names a {named} that was not there.", seq=seq, found=key)


def _key_query() -> str:
    """Return the query for entries whose kind is unknown or whose key begins otherwise than its kind asks."""
    fits = " ".join(
        f"WHEN '{kind}' THEN substr(key, 1, {len(prefix)}) <> '{prefix}'"
        for kind, prefix in KEY_PREFIXES.items()
        if prefix
    )
    fits += f" WHEN '{EntryKind.WITHDRAWAL}' THEN key = ''"
    return f"SELECT seq, kind, key FROM entry WHERE CASE kind {fits} ELSE true END ORDER BY seq"


def check_versions(connection: Connection, findings: Findings) -> None:
    """Check that analyses, looks, releases, notices and runs belong to stored versions (check 9).

    Parameters
    ----------
    connection : Connection
        Inside a reading transaction.
    findings : Findings
        Where faults are noted.
    """
    count = 0
    for kind in (EntryKind.ANALYSIS, EntryKind.LOOK, EntryKind.RELEASE, EntryKind.NOTICE, EntryKind.RUN):
        table = str(TABLES[kind].__tablename__)
        # A run may have laid down no version; analyses and looks lie before the version that reports them.
        unversioned = "AND t.version IS NOT NULL" if kind is EntryKind.RUN else ""
        inside = kind in (EntryKind.ANALYSIS, EntryKind.LOOK)
        order = "t.entry < v.entry" if inside else "t.entry > v.entry"
        query = (
            f'SELECT t.entry, t.version FROM "{table}" t WHERE NOT EXISTS '
            f"(SELECT 1 FROM version v WHERE v.version = t.version AND {order}) {unversioned} "
            "ORDER BY t.entry"
        )
        for seq, version in _some(connection, query):
            findings.add(
                9,
                f"the {kind} belongs to no version that is stored {'after' if inside else 'before'} it.",
                seq=seq,
                found="no version" if version is None else f"version {version}",
                step=COMPARE,
            )
        count += fetch(connection, f'SELECT count(*) FROM "{METADATA.tables[table].name}"')[0][0]
    findings.seen[9] = f"{count} entries"


def _some(connection: Connection, query: str) -> list[tuple[Any, ...]]:
    return fetch(connection, f"{query} LIMIT {_MOST}")
