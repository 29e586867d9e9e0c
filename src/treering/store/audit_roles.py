"""Check 8: nobody holds two of the roles on one result, and verifications rest on what they say."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from sqlalchemy import Connection

from treering.store.canonical import parse
from treering.store.checks import Findings
from treering.store.reader import fetch

_PAGE = 5000
_STEP = "Withdraw one of the two and have another person do it again; then verify anew."
_REREAD = "Read the entries named, correct the verification, and find out which program laid it down."

# An entry is live when nothing replaces it.
_BOTH = """
SELECT x.entry, a.entry, x.trial, x.outcome, a.outcome, a.adjudicator, e.canonical
FROM adjudication a JOIN extraction x ON x.trial = a.trial AND x.extractor = a.adjudicator
JOIN entry e ON e.seq = x.entry
WHERE NOT EXISTS (SELECT 1 FROM entry r WHERE r.replaces = a.entry)
AND NOT EXISTS (SELECT 1 FROM entry r WHERE r.replaces = x.entry)
ORDER BY x.entry, a.entry"""

_VERIFICATIONS = f"""
SELECT entry, trial, outcome, basis,
CAST(extractors AS TEXT), adjudicator, CAST(extractions AS TEXT), adjudication
FROM verification WHERE entry > ? ORDER BY entry LIMIT {_PAGE}"""

_NAMED = {
    table: {
        "sqlite": f"SELECT entry, trial, outcome, {person} FROM {table} "
        "WHERE entry IN (SELECT value FROM json_each(?))",
        "postgresql": f"SELECT entry, trial, outcome, {person} FROM {table} WHERE entry = ANY(?)",
    }
    for table, person in (("extraction", "extractor"), ("adjudication", "adjudicator"))
}


def check_roles(connection: Connection, findings: Findings) -> None:
    """Check that two people read each result and a third settles what differs (check 8).

    Parameters
    ----------
    connection : Connection
        Inside a reading transaction.
    findings : Findings
        Where faults are noted.
    """
    for extraction, adjudication, trial, read, settled, person, canonical in fetch(connection, _BOTH):
        # On another outcome of the trial an adjudicator may give a third reading, which decides nothing.
        if read == settled or not _is_third(canonical):
            findings.add(
                8,
                f"{person} read trial {trial}, {read}, and in entry {adjudication} adjudicated {settled}.",
                seq=extraction,
                step=_STEP,
            )
    count = 0
    for page in _verification_pages(connection):
        count += len(page)
        _check_page(connection, page, findings)
    findings.seen[8] = f"{count} verifications"


def _is_third(canonical: bytes) -> bool:
    try:
        return bool(parse(bytes(canonical))["body"].get("third_reading"))
    except (ValueError, KeyError, TypeError, AttributeError):
        return False  # what these bytes are is told by check 5


_Rows = list[tuple[Any, ...]]


def _verification_pages(connection: Connection) -> Iterator[_Rows]:
    last = -1
    while page := fetch(connection, _VERIFICATIONS, last):
        yield page
        last = page[-1][0]


def _check_page(connection: Connection, page: _Rows, findings: Findings) -> None:
    """Hold verifications against the extractions and adjudications that they name."""
    parsed = [(row, _list(row[4]), _list(row[6])) for row in page]
    readings = _named(connection, "extraction", [seq for _, _, seqs in parsed for seq in seqs])
    settled = _named(connection, "adjudication", [row[7] for row in page if row[7] is not None])
    for row, extractors, extractions in parsed:
        seen = [readings.get(seq) for seq in extractions]
        if _is_plain(row, extractors, seen):
            continue
        for fault in _faults(row, extractors, seen, settled):
            findings.add(8, fault, seq=row[0], step=_REREAD)


def _is_plain(row: tuple[Any, ...], extractors: list[Any], readings: list[tuple[Any, ...] | None]) -> bool:
    """Tell whether two readings by the two people named agreed: most verifications, and nothing to tell."""
    seq, trial, outcome, basis, _, adjudicator, _, adjudication = row
    if basis != "agreed" or adjudicator is not None or adjudication is not None or len(extractors) != 2:
        return False
    first, second = extractors
    return (
        first != second
        and len(readings) == 2
        and all(reading is not None and reading[0] < seq for reading in readings)
        and readings == [(readings[0][0], trial, outcome, first), (readings[1][0], trial, outcome, second)]  # type: ignore[index]
    )


def _faults(
    row: tuple[Any, ...],
    extractors: Sequence[Any],
    readings: Sequence[tuple[Any, ...] | None],
    settled: Mapping[int, tuple[Any, ...]],
) -> Iterator[str]:
    """Yield what is wrong with one verification."""
    seq, trial, outcome, basis, _, adjudicator, _, adjudication = row
    place = f"the verification of trial {trial}, {outcome}"
    if len(set(extractors)) != len(extractors):
        yield f"{place} counts one extractor twice."
    if basis in ("agreed", "adjudicated") and len(set(extractors)) < 2:
        yield f"{place} is called {basis} with fewer than two extractors."
    if adjudicator is not None and adjudicator in extractors:
        yield f"{place} has {adjudicator} as extractor and adjudicator."
    for reading, person in zip(readings, extractors, strict=False):
        if reading is None or reading[1:] != (trial, outcome, person) or reading[0] >= seq:
            yield f"{place} names an extraction by {person} that is not in the store before it."
    if len(readings) != len(extractors):
        yield f"{place} names {len(readings)} extractions by {len(extractors)} extractors."
    if basis == "adjudicated" and adjudication is None:
        yield f"{place} names no adjudication."
    decision = settled.get(adjudication) if adjudication is not None else None
    if adjudication is not None and (
        decision is None or decision[1:] != (trial, outcome, adjudicator) or decision[0] >= seq
    ):
        yield f"{place} names an adjudication by {adjudicator} that is not in the store before it."


def _named(connection: Connection, table: str, seqs: Sequence[Any]) -> dict[int, tuple[Any, ...]]:
    numbers = sorted({seq for seq in seqs if isinstance(seq, int)})
    if not numbers:
        return {}
    dialect = connection.dialect.name
    value = json.dumps(numbers) if dialect == "sqlite" else numbers
    return {row[0]: tuple(row) for row in fetch(connection, _NAMED[table][dialect], value)}


def _list(text: Any) -> list[Any]:
    try:
        value = json.loads(text) if isinstance(text, str | bytes) else text
    except ValueError:
        return []
    return value if isinstance(value, list) else []
