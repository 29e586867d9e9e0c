"""The lock that lets one update run at a time; it is held by the database and dies with the process.

SQLite: an exclusive transaction on a small database beside the store, so that readers of the store itself
are never blocked; the operating system ends it with the process. PostgreSQL: an advisory lock of a session
of its own.
"""

from __future__ import annotations

import sqlite3
from pathlib import Path
from typing import Protocol

from sqlalchemy import Connection, Engine
from sqlalchemy.exc import SQLAlchemyError

from treering.errors import StoreBusyError, StoreError
from treering.store.connection import explained, place_of, translated

_ADVISORY_KEY = 0x7265655F72696E67 % 2**63
_WAIT = "Wait until it has ended and run again; the lock ends with its process, there is nothing to remove."


class Lock(Protocol):
    """A lock that is held from its making until it is released."""

    def check(self) -> None:
        """Raise StoreError when the lock was lost."""

    def release(self) -> None:
        """Let the next update begin."""


class SqliteLock:
    """Exclusive transaction on a database beside the store.

    Parameters
    ----------
    store : Path
        File of the store.

    Raises
    ------
    StoreBusyError
        When another process or thread holds it.
    StoreError
        When the folder cannot be written to.
    """

    def __init__(self, store: Path) -> None:
        path = self._path = store.with_name(store.name + ".lock")
        try:
            self._connection = sqlite3.connect(path, timeout=0, isolation_level=None, check_same_thread=False)
        except sqlite3.Error as error:
            raise explained(str(error), type(error).__name__, "lock") from error
        try:
            self._connection.execute("BEGIN EXCLUSIVE")
        except sqlite3.Error as error:
            self._connection.close()
            if "locked" in str(error):
                raise _busy(str(path)) from error
            raise explained(str(error), type(error).__name__, "lock") from error
        self._file = _identity(path)

    def check(self) -> None:
        """Check that the file the lock is on is still in its place.

        Raises
        ------
        StoreError
            When someone removed it: another update may have begun on a new one.
        """
        if self._file is None or _identity(self._path) != self._file:
            raise StoreError(
                "The lock of this update was lost; nothing more is stored.",
                file=str(self._path),
                found="its file was removed or replaced",
                next_step="See that no other update runs, leave the lock file alone and run again.",
            )

    def release(self) -> None:
        """Let the next update begin."""
        self._connection.close()


class PostgresLock:
    """Advisory lock of a session of its own.

    Parameters
    ----------
    engine : Engine
        Engine of the store.

    Raises
    ------
    StoreBusyError
        When another session holds it.
    StoreError
        When the server cannot be reached.
    """

    def __init__(self, engine: Engine) -> None:
        with translated("lock"):
            self._connection: Connection = engine.connect().execution_options(isolation_level="AUTOCOMMIT")
            held = self._connection.exec_driver_sql(
                f"SELECT pg_try_advisory_lock({_ADVISORY_KEY})"
            ).scalar_one()
        if not held:
            self._connection.close()
            raise _busy(place_of(engine.url))

    def check(self) -> None:
        """Check that the session that holds the lock still lives.

        Raises
        ------
        StoreError
            When the server was restarted or dropped the session: another update may have begun.
        """
        try:
            self._connection.exec_driver_sql("SELECT 1")
        except SQLAlchemyError as error:
            raise StoreError(
                "The lock of this update was lost; nothing more is stored.",
                found=str(error.__cause__ or error).strip().splitlines()[0],
                next_step="Check that the database server runs, then run the update again.",
            ) from error

    def release(self) -> None:
        """Let the next update begin."""
        try:
            self._connection.exec_driver_sql(f"SELECT pg_advisory_unlock({_ADVISORY_KEY})")
            self._connection.close()
        except SQLAlchemyError:
            # The session is gone and the lock with it; the server must not see this connection again.
            self._connection.invalidate()
            self._connection.close()


def _identity(path: Path) -> tuple[int, int] | None:
    try:
        found = path.stat()
    except OSError:  # it is not there, which is what the caller asks about
        return None
    return found.st_dev, found.st_ino


def _busy(place: str) -> StoreBusyError:
    return StoreBusyError("Another update of this review is running.", found=place, next_step=_WAIT)
