"""CSV files of extractions: one row for each trial, outcome and extractor."""

from __future__ import annotations

import csv
import io
from typing import Any

from pydantic import ValidationError

from treering.intake.sentences import closest, record_faults
from treering.intake.values import Fault, Located, Place
from treering.records import VALUE_FIELDS, Extraction

STUDY_COLUMNS = (
    "trial",
    "title",
    "registration",
    "published",
    "year",
    "randomised",
    "design",
    "funding",
    "interests",
    "extractor",
    "correction",
)
REPORT_COLUMNS = {"report": "id", "form": "form", "citation": "citation", "identifier": "identifier"}
RESULT_COLUMNS = ("outcome", *VALUE_FIELDS, "locator", "note", "not_usable")
COLUMNS = (*STUDY_COLUMNS, *REPORT_COLUMNS, *RESULT_COLUMNS)
"""All columns; besides them ``subgroup:NAME`` columns hold the trial's level of a planned subgroup."""

NEEDED = ("trial", "report", "extractor", "outcome")
SUBGROUP = "subgroup:"


def read_table(file: str, text: str) -> tuple[list[Located], list[Fault]]:
    """Read the rows of a CSV file as extractions.

    Parameters
    ----------
    file : str
        Name for messages.
    text : str
        Content; columns separated by commas, names in the first row.

    Returns
    -------
    list of Located, list of Fault
        One extraction per row that is sound; one fault per fault of the others.
    """
    try:
        rows = _rows(text)
    except csv.Error as error:
        return [], [Fault(file, "", f"the file is not valid CSV, or only half written: {error}.")]
    if not rows:
        return [], [Fault(file, "", "the file holds no row.")]
    (_, header), *body = rows
    header = [name.strip() for name in header]
    faults = _header_faults(file, header)
    if faults or not body:
        return [], faults or [Fault(file, "", "the file holds column names and no row.")]
    records: list[Located] = []
    for line, cells in body:
        found = _row(header, cells, Place(file, row=line))
        if isinstance(found, Located):
            records.append(found)
        else:
            faults += found
    return records, faults


def _rows(text: str) -> list[tuple[int, list[str]]]:
    """Return the rows that are not empty, each with the line it begins on."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    rows, line = [], 1
    for cells in reader:
        if any(cell.strip() for cell in cells):
            rows.append((line, cells))
        line = reader.line_num + 1
    return rows


def _header_faults(file: str, header: list[str]) -> list[Fault]:
    for mark, name in ((";", "semicolons"), ("\t", "tabs")):
        if len(header) == 1 and header[0].count(mark) >= 2:
            return [Fault(file, "row 1", f"the columns are separated by {name}; separate them by commas.")]
    faults = []
    for name in header:
        known = name in COLUMNS or (name.startswith(SUBGROUP) and len(name) > len(SUBGROUP))
        if not known:
            guess = closest(name, (*COLUMNS, SUBGROUP))
            faults.append(Fault(file, "row 1", f"there is no column {name!r}{guess or '.'}"))
    for name in sorted({name for name in header if header.count(name) > 1}):
        faults.append(Fault(file, "row 1", f"the column {name!r} stands twice."))
    for name in NEEDED:
        if name not in header:
            faults.append(Fault(file, "row 1", f"the column {name!r} is missing."))
    return faults


def _row(header: list[str], cells: list[str], place: Place) -> Located | list[Fault]:
    if len(cells) != len(header):
        sentence = f"the row has {len(cells)} cells where row 1 names {len(header)} columns."
        return [Fault(place.file, place.where(), sentence)]
    given = {name: cell for name, cell in zip(header, cells, strict=True) if cell.strip()}
    missing = [name for name in NEEDED if name not in given]
    if missing:
        return [Fault(place.file, place.where(name), "this cell is needed and empty.") for name in missing]
    try:
        return Located(Extraction.model_validate(_record(given)), place)
    except ValidationError as error:
        return record_faults(error, place, Extraction)


def _record(given: dict[str, str]) -> dict[str, Any]:
    """Arrange the filled cells of a row as a record of one result."""
    study = {name: given[name] for name in STUDY_COLUMNS if name in given}
    report = {field: given[name] for name, field in REPORT_COLUMNS.items() if name in given}
    result = {name: given[name] for name in RESULT_COLUMNS if name in given}
    subgroups = {
        name.removeprefix(SUBGROUP).strip(): cell for name, cell in given.items() if name.startswith(SUBGROUP)
    }
    return {"record": "extraction", **study, "report": report, "subgroups": subgroups, "results": [result]}
