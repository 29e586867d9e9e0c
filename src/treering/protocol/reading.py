"""Reading the config files: one sentence per fault, and the text that may be kept in the store."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any, TypeVar

from pydantic import ValidationError

from treering.errors import ProtocolError
from treering.protocol.base import Part
from treering.protocol.panel import Panel
from treering.protocol.plan import Protocol

PartT = TypeVar("PartT", bound=Part)

#: Faults of the shape of a file, in plain words; the library's own words speak of patterns and tuples.
_PLAIN_WORDS = {
    "missing": "this field is missing",
    "extra_forbidden": "there is no such field",
    "string_too_short": "this field is empty",
    "string_pattern_mismatch": "write a short name of letters, digits, dots, dashes or underscores",
}


def _sentences(error: ValidationError) -> list[str]:
    """Turn validation faults into one sentence each, with the place in the file."""
    faults = error.errors()
    lists = {fault["loc"][0] for fault in faults if len(fault["loc"]) > 1}
    sentences = []
    for fault in faults:
        if fault["type"] == "too_short" and fault["loc"][0] in lists:
            continue  # the list counts as short only because its items have the faults named beside this one
        shown = fault.get("input")
        reason = _PLAIN_WORDS.get(fault["type"], fault["msg"].removeprefix("Value error, "))
        if shown == "" and fault["type"] == "string_pattern_mismatch":
            reason = f"this field is empty: {reason}"
        found = f" (found {shown!r})" if shown != "" and isinstance(shown, str | int | float | bool) else ""
        sentences.append(f"{_place(fault['loc'])}: {reason}{found}")
    return sentences


def _place(steps: tuple[int | str, ...]) -> str:
    """Name a place as people count: the first of [[people]] is people 1."""
    words = "".join(f" {step + 1}" if isinstance(step, int) else f".{step}" for step in steps)
    return words.removeprefix(".") or "the file"


def _read_toml(path: Path) -> tuple[str, dict[str, Any]]:
    try:
        text = path.read_text(encoding="utf-8")
        return text, tomllib.loads(text)
    except FileNotFoundError as error:
        raise ProtocolError(
            "the file is missing.", file=str(path), next_step="Make a review with `treering start FOLDER`."
        ) from error
    except (UnicodeDecodeError, tomllib.TOMLDecodeError, OSError) as error:
        raise ProtocolError(f"the file can't be read: {error}.", file=str(path)) from error


def _read(path: Path, shape: type[PartT]) -> PartT:
    _, data = _read_toml(path)
    try:
        return shape.model_validate(data)
    except ValidationError as error:
        faults = _sentences(error)
        listed = "".join(f"\n    {fault}." for fault in faults)
        many = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
        raise ProtocolError(
            f"{many}; correct what is named and run again.{listed}", file=str(path)
        ) from error


def read_protocol(path: Path) -> Protocol:
    """Read and check config/review.toml.

    Raises
    ------
    ProtocolError
        One sentence per fault, with its place in the file.
    """
    return _read(path, Protocol)


def read_panel(path: Path) -> Panel:
    """Read and check config/panel.toml.

    Raises
    ------
    ProtocolError
        One sentence per fault, with its place in the file.
    """
    return _read(path, Panel)


#: Where the store lies and how mail is sent: no part of the plan, and they may hold secrets.
PRIVATE_SECTIONS = frozenset({"store", "delivery"})


def public_text(text: str, file: str) -> str:
    """Return the text of a review.toml without its private sections, as it is kept in the store.

    Parameters
    ----------
    text : str
        The file's text, valid TOML.
    file : str
        Its name, for messages.

    Returns
    -------
    str
        The other lines as they stand.

    Raises
    ------
    ProtocolError
        When a private section is not written as a section of its own.
    """
    kept, private = [], False
    for line in text.splitlines(keepends=True):
        header = line.split("#")[0].strip()
        if header.startswith("["):
            private = header.strip("[] ") in PRIVATE_SECTIONS
        if not private:
            kept.append(line)
    public = "".join(kept)
    if left := sorted(PRIVATE_SECTIONS & set(tomllib.loads(public))):
        raise ProtocolError(
            f"{' and '.join(left)} must be written as sections of their own, for example [store].",
            file=file,
            next_step="They are kept out of the evidence store; write [store] and [delivery] as headers.",
        )
    return public
