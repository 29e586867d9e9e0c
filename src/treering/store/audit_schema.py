"""Check 1: tables, indexes and triggers are those that the migrations make, and they fire."""

from __future__ import annotations

from functools import cache
from typing import Any

from sqlalchemy import Connection, Engine, create_engine, inspect
from sqlalchemy.engine import URL

from treering.store.checks import Findings
from treering.store.connection import engine_for, reading, writing
from treering.store.entries import ENTRY_FORMAT
from treering.store.models import METADATA
from treering.store.reader import fetch
from treering.store.schema import HEAD_REVISION, known_revisions, migrate
from treering.store.triggers import REFUSAL, expected_triggers

_RENEW = "Copy the entries into a new store (treering store export and import) and compare their heads."
# What PostgreSQL notes of a trigger: 1 each row, 2 before, 8 delete, 16 update, 32 truncate.
_ROWS, _TABLE = 1 + 2 + 8 + 16, 2 + 32


def check_schema(engine: Engine, findings: Findings, *, review: str | None) -> bool:
    """Check that the database is a store of this release whose triggers are in force.

    Parameters
    ----------
    engine : Engine
        Of the database.
    findings : Findings
        Where faults are noted.
    review : str or None
        Review the store must belong to, when that is known from elsewhere.

    Returns
    -------
    bool
        Whether the tables are those of this release, so that they can be read.
    """
    readable = False
    with findings.guarded(1), reading(engine) as connection:
        readable = _check_revision(connection, findings)
        if readable:
            _check_store_row(connection, findings, review)
            count = (
                _check_sqlite(connection, findings)
                if engine.dialect.name == "sqlite"
                else _check_postgres(connection, findings)
            )
            findings.seen[1] = f"revision {HEAD_REVISION}, {count} triggers"
    return readable


def _check_revision(connection: Connection, findings: Findings) -> bool:
    """Tell whether the store has the tables of this release, and note why not."""
    tables = set(inspect(connection).get_table_names())
    missing = sorted((set(METADATA.tables) | {"alembic_version"}) - tables)
    revisions: list[Any] = []
    if "alembic_version" in tables:
        revisions = [row[0] for row in fetch(connection, "SELECT version_num FROM alembic_version")]
    if revisions == [HEAD_REVISION] and not missing:
        return True
    if len(revisions) == 1 and revisions[0] in known_revisions() and revisions[0] != HEAD_REVISION:
        step = "An update of treering brings it up to date; audit a copy made by treering store copy then."
    elif missing:
        step = "Take the last copy of the store that passes."
    else:
        step = "Audit it with the release of treering that wrote it; if there is none, take the last copy."
    found = f"revision {', '.join(map(str, revisions)) or 'none'}"
    if missing:
        found += f"; without {', '.join(missing[:5])}"
    findings.add(
        1,
        "The database has not the tables of this release.",
        found=found,
        expected=f"revision {HEAD_REVISION}",
        step=step,
    )
    return not missing  # with a foreign revision number the tables may still be read


def _check_store_row(connection: Connection, findings: Findings, review: str | None) -> None:
    rows = fetch(connection, "SELECT id, review, format FROM store")
    if len(rows) != 1 or rows[0][0] != 1 or rows[0][2] != ENTRY_FORMAT:
        expected = f"one row, numbered 1, format {ENTRY_FORMAT}"
        findings.add(1, "Table store is damaged.", found=rows[:3], expected=expected, step=_RENEW)
    elif review is not None and rows[0][1] != review:
        findings.add(1, "The store names another review.", found=rows[0][1], expected=review, step=_RENEW)


def _check_sqlite(connection: Connection, findings: Findings) -> int:
    """Compare every object of the schema with a store made anew, and let SQLite check its own file."""
    found, wanted = _objects(connection), _fresh_objects()
    for kind, name in sorted(wanted.keys() | found.keys()):
        if found.get((kind, name)) != wanted.get((kind, name)):
            state = "missing" if (kind, name) not in found else "unknown"
            state = "not as it was laid down" if state == "unknown" and (kind, name) in wanted else state
            findings.add(1, f"{kind} {name} is {state}.", step=_RENEW)
    for (message,) in fetch(connection, "PRAGMA integrity_check(20)"):
        if message != "ok":
            findings.add(1, "SQLite finds its file damaged.", found=message, step=_RENEW)
    return sum(kind == "trigger" for kind, _ in found)


_Objects = dict[tuple[str, str], tuple[str, str]]


def _objects(connection: Connection) -> _Objects:
    query = "SELECT type, name, tbl_name, sql FROM sqlite_master WHERE name NOT LIKE 'sqlite_%'"
    return {(kind, name): (table, sql) for kind, name, table, sql in fetch(connection, query)}


@cache
def _fresh_objects() -> _Objects:
    """Return the schema of a store made in memory by the migrations."""
    engine = create_engine("sqlite://")
    with writing(engine) as connection:
        migrate(connection)
        objects = _objects(connection)
    engine.dispose()
    return objects


def _check_postgres(connection: Connection, findings: Findings) -> int:
    """Check columns, indexes, triggers and the function they call."""
    _check_columns(connection, findings)
    query = (
        "SELECT tgname, tgtype, tgenabled, p.proname, tgqual IS NULL FROM pg_trigger "
        "JOIN pg_proc p ON p.oid = tgfoid WHERE NOT tgisinternal"
    )
    found = {row[0]: row[1:] for row in fetch(connection, query)}
    for name in sorted(expected_triggers("postgresql") | found.keys()):
        kind = _ROWS if name.endswith("_keep_rows") else _TABLE
        wanted = (kind, ("O", "A"), "treering_refuse", True)
        row = found.get(name)
        state = [row[0], _word(row[1]) in wanted[1], row[2], row[3]] if row else None
        if name not in expected_triggers("postgresql"):
            findings.add(1, f"trigger {name} is unknown.", step=_RENEW)
        elif state != [kind, True, "treering_refuse", True]:
            word = "missing" if row is None else "switched off or changed"
            findings.add(1, f"trigger {name} is {word}.", found=row, step=_RENEW)
    sources = fetch(connection, "SELECT prosrc FROM pg_proc WHERE proname = 'treering_refuse'")
    if [row[0].strip() for row in sources] != [f"BEGIN RAISE EXCEPTION '{REFUSAL}'; END"]:
        findings.add(1, "The function that refuses changes is not as it was laid down.", step=_RENEW)
    return len(found)


def _word(value: object) -> object:
    return value.decode() if isinstance(value, bytes) else value


def _check_columns(connection: Connection, findings: Findings) -> None:
    inspector = inspect(connection)
    for name, table in sorted(METADATA.tables.items()):
        dialect = connection.dialect
        found = {(c["name"], c["type"].compile(dialect), c["nullable"]) for c in inspector.get_columns(name)}
        wanted = {(c.name, _type(c.type.compile(dialect)), bool(c.nullable)) for c in table.columns}
        for column, kind, _ in sorted(found ^ wanted):
            findings.add(1, f"column {name}.{column} ({kind}) is not as it was laid down.", step=_RENEW)
    unique = {index["name"]: index["unique"] for index in inspector.get_indexes("entry")}
    if unique.get("entry_replaces") is not True or "entry_key" not in unique:
        findings.add(1, "An index of table entry is missing.", found=sorted(map(str, unique)), step=_RENEW)


def _type(name: str) -> str:
    # PostgreSQL calls a FLOAT without a precision by the other name.
    return "DOUBLE PRECISION" if name == "FLOAT" else name


def audit_engine(url: URL, *, lenient: bool = False) -> Engine:
    """Return an engine that cannot write.

    Parameters
    ----------
    url : URL
        Of the store.
    lenient : bool, optional
        Read text of SQLite that is no UTF-8, with stand-in signs, instead of stopping at it.

    Returns
    -------
    Engine
        Every connection refuses to change anything.
    """
    from sqlalchemy import event

    engine = engine_for(url)

    def prepare(connection: Any, _record: object) -> None:
        if url.get_backend_name() == "sqlite":
            connection.execute("PRAGMA query_only=ON")
            if lenient:
                connection.text_factory = lambda data: data.decode("utf-8", "surrogateescape")
        else:
            connection.read_only = True

    event.listen(engine, "connect", prepare)
    return engine
