"""Reading a table of trials, as spreadsheets of different countries write it; what is doubtful is refused."""

from __future__ import annotations

import csv
import re
from io import StringIO
from pathlib import Path
from typing import TYPE_CHECKING

from treering.cli.output import remark
from treering.errors import IntakeError

if TYPE_CHECKING:
    import pandas as pd

_PACKED = (b"PK\x03\x04", b"\xd0\xcf\x11\xe0")
_COMMA = re.compile(r"[+-]?\d*,\d+([eE][+-]?\d+)?")
_POINT = re.compile(r"[+-]?\d*\.\d+([eE][+-]?\d+)?")
_THOUSANDS = re.compile(r"\d{1,3}(,\d{3})+")
_COUNTS = ("_events", "_total")
_SAVE = "Save the sheet as CSV (UTF-8) and pool that file."


def read_table(file: Path) -> pd.DataFrame:
    """Read a CSV with one row per trial; a column "trial" names the rows.

    Fields may be separated by commas, semicolons or tabs. Where it is not the comma, a comma inside a number
    is read as the decimal mark and a remark says so. Names of known columns may differ in case and spaces.

    Raises
    ------
    IntakeError
        When the file can't be read as a table.
    """
    import pandas as pd

    text = _text(file)
    heads, rows = _cells(text, file)
    table_text = _written([heads, *rows])
    try:
        table = pd.read_csv(StringIO(table_text), index_col=False)
        if "trial" in table.columns:
            # A trial may be called "NA" or "01": a name is text, never a missing value or a number.
            names = pd.read_csv(StringIO(table_text), usecols=["trial"], dtype=str, keep_default_na=False)
            table = table.assign(trial=names["trial"]).set_index("trial", drop=False)
    except ValueError as error:
        raise IntakeError(f"the table can't be read: {error}.", file=str(file)) from error
    return table


def _text(file: Path) -> str:
    """Text of the file, or a refusal that says what the file is instead."""
    try:
        raw = file.read_bytes()
    except OSError as error:
        raise IntakeError(f"the table can't be read: {error.strerror}.", file=str(file)) from error
    if raw.startswith(_PACKED):
        raise IntakeError("this is a workbook, not a CSV.", file=str(file), next_step=_SAVE)
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise IntakeError(
            f"the table can't be read: it is not UTF-8 text (byte {error.start + 1}).",
            file=str(file),
            next_step=_SAVE,
        ) from error
    if "\0" in text:
        raise IntakeError("the table can't be read: it is not text.", file=str(file), next_step=_SAVE)
    return text


def _cells(text: str, file: Path) -> tuple[list[str], list[list[str]]]:
    """Heads and rows; wholly blank lines are passed over, every other oddity is refused."""
    first = next((line for line in text.splitlines() if line.strip()), "")
    mark = max(",;\t", key=first.count)
    try:
        lines = [
            (number, [cell.strip() for cell in row])
            for number, row in enumerate(csv.reader(StringIO(text, newline=""), delimiter=mark), start=1)
            if any(cell.strip() for cell in row)
        ]
    except csv.Error as error:
        raise IntakeError(f"the table can't be read: {error}.", file=str(file)) from error
    if len(lines) < 2:
        raise IntakeError("the table holds no trial.", file=str(file), expected="one row per trial")
    heads = [_head(cell) for cell in lines[0][1]]
    while heads and not heads[-1]:
        heads.pop()
    _refuse_doubled(heads, file)
    rows = [_fitted(row, heads, number, file) for number, row in lines[1:]]
    if mark != ",":
        _decimal_commas(heads, rows, file)
    return heads, rows


def _head(cell: str) -> str:
    """Name of a column; a known one in its own spelling, any other as it stands."""
    from treering.effects.table import ROUTES

    known = {name for routes in ROUTES.values() for route in routes for name in route.columns}
    plain = re.sub(r"[\s-]+", "_", cell.casefold())
    return plain if plain in known | {"trial", "subgroup", "date", "year"} else cell


def _refuse_doubled(heads: list[str], file: Path) -> None:
    doubled = sorted({name for name in heads if name and heads.count(name) > 1})
    if doubled:
        raise IntakeError("two columns have the same name.", file=str(file), found=", ".join(doubled))


def _fitted(row: list[str], heads: list[str], number: int, file: Path) -> list[str]:
    """Return the row as long as the heads; a filled cell beyond them would shift every number."""
    if any(row[len(heads) :]):
        raise IntakeError(
            f"row {number} has more cells than the first row has names.",
            file=str(file),
            trial=row[heads.index("trial")] if "trial" in heads else None,
            found=f"{len(row)} cells",
            expected=f"{len(heads)}",
            next_step="Quote a cell that holds the separator, or name the column.",
        )
    return row[: len(heads)] + [""] * (len(heads) - len(row))


def _decimal_commas(heads: list[str], rows: list[list[str]], file: Path) -> None:
    """Turn decimal commas to points, in place, and say so; refuse what may be a thousand."""
    places = [place for place, name in enumerate(heads) if name != "trial"]
    changed = pointed = ""
    for row in rows:
        for place in places:
            cell, name = row[place], heads[place]
            pointed = cell if not pointed and _POINT.fullmatch(cell) else pointed
            if not _COMMA.fullmatch(cell):
                continue
            if name.endswith(_COUNTS) and _THOUSANDS.fullmatch(cell):
                raise IntakeError(f"{name}: may be thousands or a decimal comma.", file=str(file), found=cell)
            row[place], changed = cell.replace(",", "."), changed or cell
    if changed and pointed:
        raise IntakeError(
            "numbers stand with a decimal comma and with a decimal point.",
            file=str(file),
            found=f"{changed} and {pointed}",
            next_step="Write all numbers with the same mark.",
        )
    if changed:
        remark(f"{file.name}: a comma inside a number was read as the decimal mark ({changed}).")


def _written(rows: list[list[str]]) -> str:
    text = StringIO()
    csv.writer(text).writerows(rows)
    return text.getvalue()
