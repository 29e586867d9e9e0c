"""Validation faults in sentences that a reviewer understands, with the place in the file."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from typing import Any

from pydantic import BaseModel, ValidationError

from treering.intake.values import Fault, Place

_WORDS = {
    "missing": "this field is needed and not there",
    "string_type": "this must be text",
    "dict_type": "this must be a table of named fields",
    "model_type": "this must be a table of named fields",
    "tuple_type": "this must be a list",
    "date_type": "write the date as YYYY-MM-DD",
    "bool_type": "this must be true or false",
    "bool_parsing": "this must be true or false",
    "int_type": "this must be a whole number",
    "too_short": "the list is too short",
    "string_pattern_mismatch": "an id holds letters, digits, point, hyphen and underscore only (at most 64)",
    "string_too_long": "the text is too long",
}


def closest(word: str, known: Iterable[str]) -> str:
    """Return "; did you mean 'x'" for the nearest known word, or an empty text."""
    near = difflib.get_close_matches(word, list(known), n=1)
    return f"; did you mean {near[0]!r}?" if near else ""


def path_of(steps: Iterable[int | str]) -> str:
    """Write the place of a field as a path: results[2].intervention_events (counted from 1)."""
    path = ""
    for step in steps:
        if isinstance(step, int):
            path += f"[{step + 1}]"
        elif step != "[key]":
            path += f".{step}" if path else step
    return path


def shown_value(value: Any) -> str:
    """Return " (found ...)" for a short plain value, or an empty text."""
    if isinstance(value, bool | str | int | float):
        text = repr(value)
        return f" (found {text if len(text) <= 60 else text[:57] + '...'})".encode(
            "utf-8", "backslashreplace"
        ).decode()
    return ""


def record_faults(error: ValidationError, place: Place, shape: type[BaseModel]) -> list[Fault]:
    """Turn the faults of one record into sentences with their place.

    Parameters
    ----------
    error : ValidationError
        What the record's shape refused.
    place : Place
        Where the record stands.
    shape : type of record
        To name the nearest known field beside an unknown one.

    Returns
    -------
    list of Fault
        One per fault, in the order of the shape's fields.
    """
    faults = error.errors(include_url=False)
    deeper = [fault["loc"] for fault in faults]
    return [
        Fault(place.file, place.where(_column(fault["loc"], place)), _sentence(fault, shape))
        for fault in faults
        # A list whose items are faulty is also called too short; the items' faults say it better.
        if fault["type"] != "too_short" or not any(_within(fault["loc"], loc) for loc in deeper)
    ]


def _within(outer: tuple[int | str, ...], inner: tuple[int | str, ...]) -> bool:
    return len(inner) > len(outer) and inner[: len(outer)] == outer


def _column(steps: tuple[int | str, ...], place: Place) -> str:
    """Return the path of a field; in a table the record has one result, so columns need no number."""
    if place.row is not None:
        shown = [step for step in steps if not isinstance(step, int)]
        if shown[:1] == ["results"]:
            shown = shown[1:]
        if shown == ["report", "id"]:
            return "report"
        if shown[:1] in (["report"], ["subgroups"]):
            return f"subgroup:{shown[-1]}" if shown[0] == "subgroups" else str(shown[-1])
        return ".".join(str(step) for step in shown)
    return path_of(steps).encode("utf-8", "backslashreplace").decode()


def _sentence(fault: Any, shape: type[BaseModel]) -> str:
    kind, found = str(fault["type"]), fault.get("input")
    if kind == "extra_forbidden":
        name = str(fault["loc"][-1]).encode("utf-8", "backslashreplace").decode()
        return f"there is no field {name!r}{closest(name, _fields(shape))}."
    if kind == "missing":
        return f"{_WORDS[kind]}."
    reason = _WORDS.get(kind) or str(fault["msg"]).removeprefix("Value error, ")
    reason = reason[:1].lower() + reason[1:]
    return f"{reason}{shown_value(found)}."


def _fields(shape: type[BaseModel]) -> list[str]:
    """Return the names of a record's fields, those of its parts included."""
    names: list[str] = []
    for name, field in shape.model_fields.items():
        names.append(name)
        for part in (field.annotation, *getattr(field.annotation, "__args__", ())):
            if isinstance(part, type) and issubclass(part, BaseModel):
                names += part.model_fields
    return names
