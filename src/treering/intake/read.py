"""Dropped files to records or faults; nothing a file can hold makes the reader raise."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Iterable, Mapping
from pathlib import PurePath
from typing import Any

from pydantic import ValidationError

from treering.intake.sentences import closest, record_faults, shown_value
from treering.intake.table import read_table
from treering.intake.values import Dropped, Fault, Located, Parsed, Place
from treering.records import RECORDS

LARGEST_FILE = 20_000_000
"""Bytes above which a file is sent back unread."""

_MARKS = {b"\xff\xfe": "UTF-16", b"\xfe\xff": "UTF-16"}


class _Unreadable(Exception):
    """The file as a whole can't be read; the message is the sentence for the reviewer."""


def read_records(dropped: Iterable[Dropped]) -> Parsed:
    """Read the records of dropped files.

    Parameters
    ----------
    dropped : iterable of Dropped
        The files; TOML (one record), JSON (one record or a list) and CSV (extractions, one row each).

    Returns
    -------
    Parsed
        Records and faults; a file with a fault may still have records here, the check sends it back whole.
    """
    files = tuple(dropped)
    records: list[Located] = []
    faults: list[Fault] = []
    for file in files:
        try:
            found, wrong = _read_file(file)
        except _Unreadable as error:
            found, wrong = [], [Fault(file.shown, "", str(error))]
        records += found
        faults += wrong
    return Parsed(files, tuple(records), tuple(faults))


def _read_file(file: Dropped) -> tuple[list[Located], list[Fault]]:
    if file.problem:
        raise _Unreadable(file.problem)
    kind = PurePath(file.name).suffix.lower()
    if kind == ".csv":
        return read_table(file.shown, _text(file))
    if kind == ".json":
        return _records_of(file.shown, _json(_text(file)))
    if kind == ".toml":
        return _records_of(file.shown, _toml(_text(file)))
    shown = f"ends in {kind}" if kind else "has no ending"
    raise _Unreadable(f"the file name {shown}; intake reads .toml, .json and .csv.")


def _text(file: Dropped) -> str:
    content = file.content
    if not content.strip():
        raise _Unreadable("the file is empty.")
    if len(content) > LARGEST_FILE:
        raise _Unreadable(f"the file is too big ({len(content)} bytes, at most {LARGEST_FILE}).")
    for mark, name in _MARKS.items():
        if content.startswith(mark):
            raise _Unreadable(f"the file is written in {name}; save it as UTF-8.")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise _Unreadable(f"line {line} is not UTF-8 text; save the file as UTF-8.") from error
    if "\x00" in text:
        raise _Unreadable("the file holds zero bytes, as a damaged or half-written file does.")
    return text


def _toml(text: str) -> Any:
    try:
        return tomllib.loads(text)
    except RecursionError as error:
        raise _Unreadable("the file is nested too deeply to be a record.") from error
    except (tomllib.TOMLDecodeError, ValueError) as error:
        raise _Unreadable(f"the file is not valid TOML, or only half written: {error}.") from error


def _no_repeats(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    names = [name for name, _ in pairs]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise _Unreadable(f"a field stands twice in one record: {', '.join(twice)}.")
    return dict(pairs)


def _json(text: str) -> Any:
    try:
        return json.loads(text, object_pairs_hook=_no_repeats)
    except RecursionError as error:
        raise _Unreadable("the file is nested too deeply to be a record.") from error
    except ValueError as error:
        raise _Unreadable(f"the file is not valid JSON, or only half written: {error}.") from error


def _records_of(file: str, content: Any) -> tuple[list[Located], list[Fault]]:
    many = isinstance(content, list)
    if many and not content:
        raise _Unreadable("the list holds no record.")
    records: list[Located] = []
    faults: list[Fault] = []
    for number, item in enumerate(content if many else [content], start=1):
        place = Place(file, number=number if many else None)
        found = _record_of(item, place)
        if isinstance(found, Located):
            records.append(found)
        else:
            faults += found
    return records, faults


def _record_of(item: Any, place: Place) -> Located | list[Fault]:
    if not isinstance(item, Mapping):
        return [Fault(place.file, place.where(), "a record is a table of named fields.")]
    word = item.get("record")
    shape = RECORDS.get(word) if isinstance(word, str) else None
    if shape is None:
        if word is None:
            sentence = f"say what this is, for example record = 'extraction'; known: {', '.join(RECORDS)}."
        else:
            sentence = f"there is no kind of record{shown_value(word)}{closest(str(word), RECORDS) or '.'}"
        return [Fault(place.file, place.where("record"), sentence)]
    try:
        return Located(shape.model_validate(item), place)
    except ValidationError as error:
        return record_faults(error, place, shape)
