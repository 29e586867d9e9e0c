"""Building stones of the records: identifiers, numbers, dates and texts that refuse to be guessed at."""

from __future__ import annotations

import calendar
import math
import re
from datetime import date, datetime
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

LARGEST = 1e12
"""Largest magnitude of a number read from a report; beyond it a cell holds something else."""

LONGEST = 20_000
"""Most characters of one text."""

_PLAIN = re.compile(r"[+-]?[0-9]+(\.[0-9]+)?([eE][+-]?[0-9]{1,3})?")
_REDUCED_DATE = re.compile(r"([0-9]{4})(?:-([0-9]{2})(?:-([0-9]{2}))?)?")
_ABSENT_WORDS = frozenset(
    {"na", "n/a", "nr", "nd", "-", "--", ".", "not reported", "none", "null", "nan", "?"}
)


class Record(BaseModel):
    """One record as a reviewer hands it in: frozen, and an unknown field is a fault."""

    model_config = ConfigDict(extra="forbid", frozen=True)


def _text_to_number(text: str) -> float | int:
    """Read a plain decimal number; anything that needs a guess is refused."""
    stripped = text.strip().replace("\u2212", "-")
    if _PLAIN.fullmatch(stripped):
        return int(stripped) if re.fullmatch(r"[+-]?[0-9]{1,15}", stripped) else float(stripped)
    if stripped.lower() in _ABSENT_WORDS:
        raise ValueError("leave the field empty when the report gives no number; 0 means zero was reported")
    if "," in stripped and re.fullmatch(r"[+-]?[\d.,\s]+", stripped):
        raise ValueError(
            "a comma in a number can mean two things: use a point for decimals, nothing for thousands"
        )
    if re.match(r"[+-]?\d", stripped):
        raise ValueError("this is not a plain number: write it alone, without unit, sign or second value")
    raise ValueError("this is not a number")


def plain_number(value: Any) -> Any:
    """Turn a cell into a finite number, or refuse it with a sentence.

    Parameters
    ----------
    value : object
        A number, or text that holds a plain decimal number with a point. Empty text is absent.

    Returns
    -------
    float, int or None
        Whole numbers stay whole; None means "not reported".

    Raises
    ------
    ValueError
        For comma decimals, units, words, truth values, infinities and magnitudes above ``LARGEST``.
    """
    if value is None or (isinstance(value, str) and not value.strip()):
        return None
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        raise ValueError("this is not a number")
    number = _text_to_number(value) if isinstance(value, str) else value
    if not math.isfinite(number) or abs(number) > LARGEST:
        raise ValueError("the number is out of any sensible range")
    return int(number) if isinstance(number, float) and number.is_integer() else number


def whole_number(value: Any) -> Any:
    """Turn a cell into a whole number of at least 0, or refuse it (see :func:`plain_number`)."""
    number = plain_number(value)
    if number is None:
        return None
    if not isinstance(number, int):
        raise ValueError("people and events are counted in whole numbers")
    if number < 0:
        raise ValueError("a count can't be below 0")
    return number


def written_text(value: Any) -> Any:
    """Strip a text; empty is absent; characters that no file can hold are refused."""
    if not isinstance(value, str):
        return value
    if any("\ud800" <= sign <= "\udfff" or sign == "\x00" for sign in value):
        raise ValueError("the text holds characters that can't be written as UTF-8")
    if len(value) > LONGEST:
        raise ValueError(f"the text is too long ({len(value)} characters, at most {LONGEST})")
    return value.strip() or None


def iso_day(value: Any) -> Any:
    """Accept a full ISO date (YYYY-MM-DD) as text or TOML date, nothing else."""
    if isinstance(value, str) and not value.strip():
        return None
    if isinstance(value, datetime):
        raise ValueError("write a date alone, YYYY-MM-DD, without a time")
    if isinstance(value, date):
        return value
    if isinstance(value, str) and re.fullmatch(r"[0-9]{4}-[0-9]{2}-[0-9]{2}", value.strip()):
        try:
            return date.fromisoformat(value.strip())
        except ValueError as error:
            raise ValueError("there is no such day") from error
    raise ValueError("write the date as YYYY-MM-DD")


def reduced_date(value: Any) -> Any:
    """Accept YYYY, YYYY-MM or YYYY-MM-DD (ISO 8601, reduced precision) and keep it as written."""
    if isinstance(value, datetime):
        raise ValueError("write a date alone, YYYY-MM-DD, without a time")
    if isinstance(value, date):
        return value.isoformat()
    text = str(value).strip() if isinstance(value, str | int) and not isinstance(value, bool) else "?"
    if not text:
        return None
    if not _REDUCED_DATE.fullmatch(text):
        raise ValueError("write the date as YYYY-MM-DD, or YYYY-MM or YYYY when the report says no more")
    try:
        last_day(text)
    except ValueError as error:
        raise ValueError("there is no such day") from error
    return text


def last_day(written: str) -> date:
    """Return the last day that a reduced ISO date can mean.

    The last, because a report of "1948" was certainly out by the end of that year and not before.

    Raises
    ------
    ValueError
        If the text is no such date.
    """
    match = _REDUCED_DATE.fullmatch(written)
    if not match:
        raise ValueError(f"no ISO date: {written!r}")
    year = int(match[1])
    month = int(match[2] or 12)
    if not 1 <= month <= 12 or year < 1:
        raise ValueError(f"no ISO date: {written!r}")
    return date(year, month, int(match[3] or calendar.monthrange(year, month)[1]))


Identifier = Annotated[
    str, BeforeValidator(written_text), Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$", max_length=64)
]
Text = Annotated[str, BeforeValidator(written_text)]
OptionalText = Annotated[str | None, BeforeValidator(written_text)]
Number = Annotated[float | int | None, BeforeValidator(plain_number)]
Whole = Annotated[int | None, BeforeValidator(whole_number)]
Positive = Annotated[Annotated[int, Field(ge=1)] | None, BeforeValidator(whole_number)]
Year = Annotated[Annotated[int, Field(ge=1800, le=2200)] | None, BeforeValidator(whole_number)]
Day = Annotated[date, BeforeValidator(iso_day)]
OptionalDay = Annotated[date | None, BeforeValidator(iso_day)]
WrittenDate = Annotated[str | None, BeforeValidator(reduced_date)]
