"""Triggers that let rows be added and nothing else.

Migrations call these functions, so what they write must never change; a better trigger gets a new function
and a new migration.
"""

from __future__ import annotations

from sqlalchemy import Connection

from treering.store.models import METADATA

REFUSAL = "append-only: rows of the evidence store are never changed or removed"


def guard(connection: Connection, table: str, primary: tuple[str, ...]) -> None:
    """Make a table append-only.

    Parameters
    ----------
    connection : Connection
        Inside the transaction of a migration.
    table : str
        Name of the table.
    primary : tuple of str
        Columns of its primary key.
    """
    for statement in guard_statements(connection.dialect.name, table, primary):
        connection.exec_driver_sql(statement)


def guard_statements(dialect: str, table: str, primary: tuple[str, ...]) -> list[str]:
    """Return the statements that make a table append-only, for the migration and for the audit.

    Parameters
    ----------
    dialect : str
        "sqlite" or "postgresql".
    table : str
        Name of the table.
    primary : tuple of str
        Columns of its primary key.

    Returns
    -------
    list of str
        CREATE TRIGGER statements.
    """
    if dialect == "postgresql":
        return [
            f"CREATE TRIGGER {table}_keep_rows BEFORE UPDATE OR DELETE ON {table} "
            "FOR EACH ROW EXECUTE FUNCTION treering_refuse()",
            f"CREATE TRIGGER {table}_keep_table BEFORE TRUNCATE ON {table} "
            "FOR EACH STATEMENT EXECUTE FUNCTION treering_refuse()",
        ]
    refuse = f"BEGIN SELECT RAISE(ABORT, '{REFUSAL}'); END"
    return [
        f"CREATE TRIGGER {table}_no_update BEFORE UPDATE ON {table} {refuse}",
        f"CREATE TRIGGER {table}_no_delete BEFORE DELETE ON {table} {refuse}",
        f"CREATE TRIGGER {table}_no_replace BEFORE INSERT ON {table} WHEN {_taken(table, primary)} {refuse}",
    ]


def refusal_function() -> str:
    """Return the statement for the function that the triggers of PostgreSQL call.

    Returns
    -------
    str
        CREATE FUNCTION statement.
    """
    return (
        "CREATE FUNCTION treering_refuse() RETURNS trigger LANGUAGE plpgsql AS "
        f"$$ BEGIN RAISE EXCEPTION '{REFUSAL}'; END $$"
    )


def _taken(table: str, primary: tuple[str, ...]) -> str:
    # INSERT OR REPLACE removes rows without firing delete triggers (unless the connection asks for it), so
    # inserts are watched too; the ledger also refuses a gap.
    if table == "entry":
        return (
            "NEW.seq IS NOT (SELECT coalesce(max(seq), -1) + 1 FROM entry) "
            "OR EXISTS (SELECT 1 FROM entry WHERE replaces = NEW.replaces)"
        )
    match = " AND ".join(f"{column} = NEW.{column}" for column in primary)
    return f"EXISTS (SELECT 1 FROM {table} WHERE {match})"


def expected_triggers(dialect: str) -> set[str]:
    """Return the names of the triggers a sound store has.

    Parameters
    ----------
    dialect : str
        "sqlite" or "postgresql".

    Returns
    -------
    set of str
        Of every table of the models.
    """
    names = set()
    for table in METADATA.tables.values():
        primary = tuple(column.name for column in table.primary_key)
        names |= {statement.split()[2] for statement in guard_statements(dialect, table.name, primary)}
    return names


def installed_triggers(connection: Connection) -> set[str]:
    """Return the names of the triggers a store has and that fire.

    Parameters
    ----------
    connection : Connection
        To the store.

    Returns
    -------
    set of str
        Switched-off triggers of PostgreSQL are left out.
    """
    query = "SELECT name FROM sqlite_master WHERE type = 'trigger'"
    if connection.dialect.name == "postgresql":
        query = "SELECT tgname FROM pg_trigger WHERE NOT tgisinternal AND tgenabled IN ('O', 'A')"
    return {str(row[0]) for row in connection.exec_driver_sql(query)}
