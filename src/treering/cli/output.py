"""How commands print: data to stdout, remarks to stderr, JSON for machines."""

from __future__ import annotations

import json
import sys
from collections.abc import Collection, Mapping, Sequence
from typing import Any

EXIT_DONE = 0
EXIT_REFUSED = 1
EXIT_WRONG_USE = 2
#: A column of single words up to this length, dates among them, is never broken over lines.
_WHOLE = 20


def say(text: str) -> None:
    """Print data to stdout."""
    print(text)


def remark(text: str) -> None:
    """Print a remark to stderr."""
    print(text, file=sys.stderr)


def say_json(value: Any, *, line: bool = False) -> None:
    """Print a value as JSON to stdout; what is not finite is null, never a word that JSON lacks.

    Parameters
    ----------
    value : object
        Plain values.
    line : bool
        On one line, for commands that print several values one after another.
    """
    from treering.synthesis.numbers import plain

    print(json.dumps(plain(value), indent=None if line else 2, ensure_ascii=False, allow_nan=False))


def say_table(
    rows: Sequence[Mapping[str, Any]], columns: Mapping[str, str], *, short: Collection[str] = ()
) -> None:
    """Print rows as a table: plain tab-separated text when piped, ruled on a terminal.

    Parameters
    ----------
    rows : sequence of mapping
        The data.
    columns : mapping of str to str
        Field name to column head, in order.
    short : collection of str
        Fields with long hashes, of which a terminal shows the beginning; a pipe gets the whole.
    """
    if sys.stdout.isatty():
        _rule(rows, columns, short)
        return
    print("\t".join(columns.values()))
    for row in rows:
        print("\t".join(_cell(row.get(field)) for field in columns))


def _rule(rows: Sequence[Mapping[str, Any]], columns: Mapping[str, str], short: Collection[str]) -> None:
    from rich.box import SIMPLE_HEAD
    from rich.console import Console
    from rich.table import Table

    cells = [[_on_terminal(row, field, short) for field in columns] for row in rows]
    table = Table(box=SIMPLE_HEAD, pad_edge=False)
    for number, (field, head) in enumerate(columns.items()):
        figures = bool(rows) and all(isinstance(row.get(field), int | float) for row in rows)
        words = [line[number] for line in cells]
        table.add_column(
            head,
            overflow="fold",
            justify="right" if figures else "left",
            no_wrap=all(len(word) <= _WHOLE and " " not in word for word in words),
        )
    for line in cells:
        table.add_row(*line)
    # Cells are data: a square bracket in a reason is no markup.
    Console(markup=False, highlight=False).print(table)


def _on_terminal(row: Mapping[str, Any], field: str, short: Collection[str]) -> str:
    text = _cell(row.get(field), "\n")
    return f"{text[:12]}\u2026" if field in short and len(text) > 12 else text


def _cell(value: Any, between: str = ", ") -> str:
    if value is None:
        return "-"
    if isinstance(value, float):
        return f"{value:.4g}"
    if isinstance(value, list | tuple):
        return between.join(_cell(item) for item in value)
    return str(value)
