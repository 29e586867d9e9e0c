"""What all typed tables share."""

from __future__ import annotations

from typing import Any

from sqlalchemy import JSON, BigInteger
from sqlmodel import Field, SQLModel


class Body(SQLModel):
    """What every typed table shares: the entry it repeats."""

    entry: int = Field(primary_key=True, foreign_key="entry.seq", sa_column_kwargs={"autoincrement": False})


def json_column() -> Any:
    """Return a column for lists and tables; empty when absent."""
    return Field(default=None, sa_type=JSON, nullable=True)


def whole_column() -> Any:
    """Return a column for whole numbers; empty when absent."""
    return Field(default=None, sa_type=BigInteger, nullable=True)
