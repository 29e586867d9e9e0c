"""Revisions of the tables: what this code writes, and how older stores are brought up to it.

Migrations add tables, columns or indexes; they never touch the bytes or hashes of an entry.
"""

from __future__ import annotations

from pathlib import Path

from sqlalchemy import Connection, Engine, insert, inspect

from treering.errors import StoreError
from treering.store.connection import place_of, writing
from treering.store.entries import ENTRY_FORMAT
from treering.store.models import METADATA

HEAD_REVISION = "0001"
"""Newest revision in ``migrations/versions``."""

_MIGRATIONS = Path(__file__).parent / "migrations"


def revision_of(connection: Connection) -> str | None:
    """Return the revision of a store.

    Parameters
    ----------
    connection : Connection
        To any database.

    Returns
    -------
    str or None
        None when the database holds no tables at all.

    Raises
    ------
    StoreError
        When it holds tables that are not a store.
    """
    tables = inspect(connection).get_table_names()
    if not tables:
        return None
    if "alembic_version" in tables and "entry" in tables:
        row = connection.exec_driver_sql("SELECT version_num FROM alembic_version").fetchone()
        if row is not None:
            return str(row[0])
    raise StoreError(
        "The database holds tables that are no evidence store.",
        found=", ".join(sorted(tables)[:5]),
        next_step="Point store in config/review.toml to the evidence store, or to an empty database.",
    )


def lay_out(engine: Engine, review: str) -> None:
    """Make all tables in one transaction: a store is there as a whole or not at all.

    Parameters
    ----------
    engine : Engine
        On an empty database.
    review : str
        Name of the review the store belongs to.

    Raises
    ------
    StoreError
        When the database is not empty or cannot be written to.
    """
    with writing(engine) as connection:
        if revision_of(connection) is not None:
            raise StoreError(
                "There is a store already.",
                file=place_of(engine.url),
                next_step="Open it, or choose another place for a new one.",
            )
        _check_encoding(connection)
        migrate(connection)
        values = {"id": 1, "review": review, "format": ENTRY_FORMAT}
        connection.execute(insert(METADATA.tables["store"]), [values])


def _check_encoding(connection: Connection) -> None:
    if connection.dialect.name != "postgresql":
        return
    found = connection.exec_driver_sql("SHOW server_encoding").scalar_one()
    if found != "UTF8":
        raise StoreError(
            "The database cannot hold every character.",
            found=f"encoding {found}",
            expected="encoding UTF8",
            next_step="Make the database with ENCODING 'UTF8' and start again.",
        )


def migrate(connection: Connection, *, to: str = HEAD_REVISION) -> None:
    """Bring the tables to a revision.

    Parameters
    ----------
    connection : Connection
        Inside a writing transaction; all changes are part of it.
    to : str, optional
        Revision to stop at; only tests stop early.
    """
    # Alembic takes half a second to import and is needed only here.
    from alembic import command
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", str(_MIGRATIONS).replace("%", "%%"))
    config.set_main_option("path_separator", "os")
    config.attributes["connection"] = connection
    command.upgrade(config, to)


def known_revisions() -> list[str]:
    """Return the revisions this code knows, oldest first.

    Returns
    -------
    list of str
        From the names of the files in ``migrations/versions``.
    """
    return sorted(path.name[1:5] for path in (_MIGRATIONS / "versions").glob("m[0-9]*.py"))


def check_revision(found: str) -> bool:
    """Tell whether a store must be migrated.

    Parameters
    ----------
    found : str
        Its revision.

    Returns
    -------
    bool
        False when it is up to date.

    Raises
    ------
    StoreError
        When the store was made by a later version of treering.
    """
    if found == HEAD_REVISION:
        return False
    if found in known_revisions():
        return True
    raise StoreError(
        "The store was written by a later version of treering.",
        found=f"revision {found}",
        expected=f"revision {HEAD_REVISION} or earlier",
        next_step="Update treering on this machine; the store was not touched.",
    )
