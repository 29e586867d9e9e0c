"""Engines for SQLite and PostgreSQL, and database errors turned into those of treering."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, Engine, create_engine, event, make_url
from sqlalchemy.engine import URL
from sqlalchemy.exc import ArgumentError, DBAPIError, SQLAlchemyError

from treering.errors import StoreBusyError, StoreError

_WAIT_SECONDS = 30
_WRITING = "treering_writing"


def store_url(target: str | Path) -> URL:
    """Return the database URL of a path or a URL.

    Parameters
    ----------
    target : str or Path
        Path of a SQLite file, or a ``sqlite:///`` or ``postgresql+psycopg://`` URL.

    Returns
    -------
    URL
        Understood by SQLAlchemy.

    Raises
    ------
    StoreError
        For any other database.
    """
    if isinstance(target, Path) or "://" not in target:
        return _absolute(URL.create("sqlite", database=str(target)))
    try:
        url = make_url(target)
    except ArgumentError as error:
        raise StoreError("The address of the store cannot be read.", found=target) from error
    if url.drivername in ("postgresql", "postgres"):
        url = url.set(drivername="postgresql+psycopg")
    if url.drivername not in ("sqlite", "postgresql+psycopg") or not url.database:
        raise StoreError(
            "The store cannot live in this database.",
            found=url.render_as_string(hide_password=True),
            expected="a path of a SQLite file or a postgresql+psycopg:// URL with a database name",
            next_step="Correct store in config/review.toml.",
        )
    return _absolute(url) if url.drivername == "sqlite" else url


def _absolute(url: URL) -> URL:
    # A connection opened later must find the same file, wherever the process has gone meanwhile.
    return url.set(database=str(Path(str(url.database)).absolute()))


def place_of(url: URL) -> str:
    """Return where a store lies, for people.

    Parameters
    ----------
    url : URL
        As :func:`store_url` returns it.

    Returns
    -------
    str
        The path of a file, or the URL without its password.
    """
    sqlite = url.get_backend_name() == "sqlite"
    return str(url.database) if sqlite else url.render_as_string(hide_password=True)


def engine_for(url: URL) -> Engine:
    """Return an engine whose transactions suit an append-only ledger.

    Parameters
    ----------
    url : URL
        As :func:`store_url` returns it.

    Returns
    -------
    Engine
        SQLite: every commit flushed to disk, foreign keys on, readers beside one writer. PostgreSQL: a
        reader sees one snapshot for all its queries.
    """
    if url.get_backend_name() == "sqlite":
        engine = create_engine(url, connect_args={"timeout": _WAIT_SECONDS})
        event.listen(engine, "connect", _prepare_sqlite)
        event.listen(engine, "begin", _begin_sqlite)
        return engine
    return create_engine(url, pool_pre_ping=True, isolation_level="REPEATABLE READ")


def _prepare_sqlite(connection: Any, _record: object) -> None:
    # Python's own transaction handling would begin too late to hold a snapshot; treering begins itself.
    connection.isolation_level = None
    for pragma in ("foreign_keys=ON", "synchronous=FULL", "cache_size=-65536", "recursive_triggers=ON"):
        connection.execute(f"PRAGMA {pragma}")


def _begin_sqlite(connection: Connection) -> None:
    writing = connection.get_execution_options().get(_WRITING, False)
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writing else "BEGIN")


def set_write_ahead(engine: Engine) -> None:
    """Let readers of a SQLite file go on while it is written to; the file remembers it.

    Parameters
    ----------
    engine : Engine
        Of any database; PostgreSQL needs nothing.

    Raises
    ------
    StoreError
        When the file cannot be written.
    """
    if engine.dialect.name != "sqlite":
        return
    # The mode cannot be changed inside a transaction, which is where SQLAlchemy's connections always are.
    with translated("write"):
        raw = engine.raw_connection()
        try:
            raw.cursor().execute("PRAGMA journal_mode=WAL")
        finally:
            raw.close()


@contextmanager
def reading(engine: Engine) -> Iterator[Connection]:
    """Open a transaction that only reads.

    Parameters
    ----------
    engine : Engine
        As :func:`engine_for` returns it.

    Yields
    ------
    Connection
        All its queries see the same state of the store.

    Raises
    ------
    StoreError
        When the database refuses.
    """
    with translated("read"), engine.connect() as connection, connection.begin():
        yield connection


@contextmanager
def writing(engine: Engine, *, lock: str | None = None) -> Iterator[Connection]:
    """Open a transaction that writes; another writer waits until it ends.

    Parameters
    ----------
    engine : Engine
        As :func:`engine_for` returns it.
    lock : str, optional
        Table that is locked against other writers on PostgreSQL; SQLite locks as a whole.

    Yields
    ------
    Connection
        Committed on a clean exit, rolled back on any error.

    Raises
    ------
    StoreError
        When the database refuses; the transaction is rolled back then.
    """
    options: dict[str, Any] = {_WRITING: True}
    if engine.dialect.name == "postgresql":
        # The lock below gives the order; a snapshot taken before waiting for it would be stale.
        options["isolation_level"] = "READ COMMITTED"
    with translated("write"), engine.connect().execution_options(**options) as connection, connection.begin():
        if lock and engine.dialect.name == "postgresql":
            connection.exec_driver_sql(f"SET LOCAL lock_timeout = '{_WAIT_SECONDS}s'")
            connection.exec_driver_sql(f"LOCK TABLE {lock} IN SHARE ROW EXCLUSIVE MODE")
        yield connection


@contextmanager
def translated(action: str) -> Iterator[None]:
    """Turn errors of the database into errors of treering.

    Parameters
    ----------
    action : str
        What was tried, "read" or "write".

    Yields
    ------
    None

    Raises
    ------
    StoreError
        With what to do next.
    """
    try:
        yield
    except (SQLAlchemyError, sqlite3.Error) as error:  # opening and fetching give the driver's own errors
        cause = error.orig if isinstance(error, DBAPIError) else error
        raise explained(str(cause), type(cause).__name__, action) from error


_HINTS: tuple[tuple[tuple[str, ...], str, str], ...] = (
    (
        ("readonly", "read-only", "unable to open", "permission denied"),
        "The store cannot be opened for writing.",
        "Give the account that runs treering the right to write to the store and its folder.",
    ),
    (
        ("is full", "diskfull", "no space left", "disk i/o error", "could not extend"),
        "The disk of the store is full or failing; the entries at hand were not stored.",
        "Free some space and run again; what was stored before is unharmed.",
    ),
    (
        ("append-only",),
        "The store is append-only: nothing in it is changed or removed.",
        "Lay down a correction or a withdrawal instead.",
    ),
    (
        ("malformed", "not a database", "corrupt"),
        "The store is damaged or is no database.",
        "Run treering audit on it, and compare it with the last copy.",
    ),
    (
        ("connection", "server closed", "shutting down", "adminshutdown", "terminating"),
        "The database server cannot be reached.",
        "Check that it runs and that its address in config/review.toml is right, then run again: "
        "what was stored already is not stored twice.",
    ),
)


def explained(text: str, name: str, action: str) -> StoreError:
    """Return the error that explains a message of the database.

    Parameters
    ----------
    text, name : str
        Message and class name of the database's error.
    action : str
        What was tried.

    Returns
    -------
    StoreError
        `StoreBusyError` when another writer was in the way.
    """
    seen = f"{name} {text}".lower()
    found = text.strip().splitlines()[0] if text.strip() else name
    if "locked" in seen or "locknotavailable" in seen or "lock timeout" in seen:
        return StoreBusyError(
            "Another writer holds the store.",
            found=found,
            next_step="Wait until the other update has ended and run again.",
        )
    for words, message, step in _HINTS:
        if any(word in seen for word in words):
            return StoreError(message, found=found, next_step=step)
    return StoreError(
        f"The database refused to {action}; entries at hand were not stored.",
        found=found,
        next_step="Run treering audit; if it passes, report this fault of the program.",
    )
