"""How commands print: data to stdout, remarks to stderr, JSON for machines."""

from __future__ import annotations

import json
import sys
from collections.abc import Mapping, Sequence
from typing import Any

EXIT_DONE = 0
EXIT_REFUSED = 1
EXIT_WRONG_USE = 2


def say(text: str) -> None:
    """Print data to stdout."""
    print(text)


def remark(text: str) -> None:
    """Print a remark to stderr."""
    print(text, file=sys.stderr)


def say_json(value: Any) -> None:
    """Print a value as JSON to stdout; what is not finite is null, never a word that JSON lacks."""
    from treering.synthesis.numbers import plain

    print(json.dumps(plain(value), indent=2, ensure_ascii=False, allow_nan=False))


def say_table(rows: Sequence[Mapping[str, Any]], columns: Mapping[str, str], *, title: str = "") -> None:
    """Print rows as a table: plain tab-separated text when piped, ruled on a terminal.

    Parameters
    ----------
    rows : sequence of mapping
        The data.
    columns : mapping of str to str
        Field name to column head, in order.
    title : str
        Printed above on a terminal.
    """
    cells = [[_cell(row.get(field)) for field in columns] for row in rows]
    if not sys.stdout.isatty():
        print("\t".join(columns.values()))
        for row in cells:
            print("\t".join(row))
        return
    from rich.console import Console
    from rich.table import Table

    table = Table(title=title or None, title_justify="left")
    for head in columns.values():
        table.add_column(head, overflow="fold")
    for row in cells:
        table.add_row(*row)
    Console().print(table)


def _cell(value: Any) -> str:
    if value is None:
        return "-"
    if isinstance(value, float):
        return f"{value:.4g}"
    if isinstance(value, list | tuple):
        return ", ".join(_cell(item) for item in value)
    return str(value)
