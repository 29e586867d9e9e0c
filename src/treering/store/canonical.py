"""Canonical bytes of JSON values (RFC 8785), the bytes that are hashed.

The general-purpose library `rfc8785` defines what is canonical. It works value by value in Python; most
bodies of a review are plain (ASCII keys, short numbers), and for those the C encoder of the standard library
writes the same bytes several times as fast. :func:`canonical_bytes` takes that road only when reading the
text back shows that nothing in it is written differently by the two; the tests hold both equal on generated
values.
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Callable, Iterator
from json.encoder import encode_basestring
from typing import Any

import rfc8785

from treering.errors import CanonicalError


def sorted_encoder() -> Callable[[Any], str]:
    """Return a function that writes JSON with sorted keys and without spaces.

    `json.JSONEncoder.encode` makes its C encoder anew for each value, which takes longer than writing a short
    one; here it is made once.

    Returns
    -------
    callable
        Value to text; raises TypeError, ValueError or RecursionError for what is no JSON.
    """
    encoder = json.JSONEncoder(sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)
    make: Any = getattr(json.encoder, "c_make_encoder", None)
    if make is None:  # an interpreter without the accelerator
        return encoder.encode
    write = make(None, encoder.default, encode_basestring, None, ":", ",", True, False, False)
    return lambda value: "".join(write(value, 0))


_ENCODE = sorted_encoder()
_LARGEST = 2**53 - 1
_LONG = 16  # digits from which a whole number may lie beyond 2**53 - 1

# Keys are sorted by code point in Python and by UTF-16 unit in RFC 8785: they differ for astral characters.
# Lone surrogates have no UTF-8 form at all.
_ASTRAL = re.compile(r"[\ud800-\udfff\U00010000-\U0010ffff]")

_UNLIKE = object()
"""Stands for a number that Python may write otherwise than RFC 8785; unlike any value."""


def _alike_float(text: str) -> object:
    return _UNLIKE if "e" in text or text.endswith(".0") else float(text)


def _alike_int(text: str) -> object:
    return int(text) if len(text) < _LONG else _UNLIKE


def _number(text: str) -> int | float:
    number = int(text)
    return number if len(text) < _LONG or abs(number) <= _LARGEST else float(text)


_DECODE_ALIKE = json.JSONDecoder(parse_float=_alike_float, parse_int=_alike_int).decode
_DECODE = json.JSONDecoder(parse_int=_number).decode


def canonical_bytes(value: Any, *, key: str | None = None) -> bytes:
    """Return the canonical bytes of a JSON value.

    Parameters
    ----------
    value : JSON value
        None, bool, int, float, str, list, tuple or dict with str keys, nested at will.
    key : str, optional
        Key of the entry the value belongs to, for the message of an error.

    Returns
    -------
    bytes
        UTF-8 text as RFC 8785 (Rundgren, Jordan and Erdtman 2020), section 3, lays down.

    Raises
    ------
    CanonicalError
        When a part of the value has no canonical form: not-a-number, an infinity, an integer beyond
        2**53 - 1, a key that is no string, a lone surrogate or a type JSON does not know.
    """
    try:
        text = _ENCODE(value)
        # Reading back also catches what the encoder converts in silence, such as keys that are numbers.
        if (text.isascii() or not _ASTRAL.search(text)) and _DECODE_ALIKE(text) == value:
            return text.encode()
    except (TypeError, ValueError, RecursionError):
        pass  # the library below accepts the value after all or says what is wrong with it
    return library_bytes(value, key=key)


def library_bytes(value: Any, *, key: str | None = None) -> bytes:
    """Return the canonical bytes as the library makes them, without the shorter road.

    Parameters
    ----------
    value : JSON value
        As for :func:`canonical_bytes`.
    key : str, optional
        As for :func:`canonical_bytes`.

    Returns
    -------
    bytes
        The same bytes as :func:`canonical_bytes`.

    Raises
    ------
    CanonicalError
        As for :func:`canonical_bytes`.
    """
    try:
        return rfc8785.dumps(value)
    except (ValueError, TypeError, RecursionError) as error:
        raise _explained(value, key, error) from error


def canonical_string(text: str, *, key: str | None = None) -> bytes:
    """Return the canonical bytes of one string, quotation marks included.

    Parameters
    ----------
    text : str
        Any text.
    key : str, optional
        Key of the entry it belongs to, for the message of an error.

    Returns
    -------
    bytes
        RFC 8785 section 3.2.2.2.

    Raises
    ------
    CanonicalError
        When the text holds a lone surrogate.
    """
    try:
        return encode_basestring(text).encode()
    except UnicodeEncodeError as error:
        raise _explained(text, key, error) from error


def parse(data: bytes) -> Any:
    """Return the JSON value of canonical bytes.

    Parameters
    ----------
    data : bytes
        As :func:`canonical_bytes` returns them.

    Returns
    -------
    JSON value
        Equal to the one written. Whole numbers beyond 2**53 - 1 can only have been floats (RFC 8785 writes
        them without point up to 1e21) and come back as such.

    Raises
    ------
    ValueError
        When the bytes are no JSON.
    """
    return _DECODE(data.decode())


def parse_canonical(data: bytes) -> Any:
    """Return the JSON value of bytes after checking that they are its canonical form.

    Parameters
    ----------
    data : bytes
        Bytes read from a store or a file.

    Returns
    -------
    JSON value
        As :func:`parse` gives it.

    Raises
    ------
    CanonicalError
        When they are no JSON, or not in canonical form.
    """
    try:
        text = data.decode()
        if text.isascii() or not _ASTRAL.search(text):
            value = _DECODE_ALIKE(text)
            if _encoded(value) == text:
                return value
        value = _DECODE(text)
        if library_bytes(value) == data:
            return value
    except (ValueError, RecursionError) as error:
        raise _not_canonical(data, str(error)) from error
    raise _not_canonical(data, "valid JSON, written otherwise")


def _encoded(value: Any) -> str | None:
    try:
        return _ENCODE(value)
    except TypeError:  # a number was set aside by _DECODE_ALIKE
        return None


def _not_canonical(data: bytes, reason: str) -> CanonicalError:
    return CanonicalError(
        "The bytes are not in canonical form.",
        found=f"{data[:80]!r} ({reason})",
        expected="JSON as RFC 8785 writes it",
        next_step="They were altered outside treering: compare them with a copy.",
    )


def _explained(value: Any, key: str | None, error: Exception) -> CanonicalError:
    """Name the key and the field that cannot be written."""
    field, found = next(_faults(value, ""), ("", None))
    place = f"field {field}" if field else "the value"
    owner = f"entry {key}: " if key is not None else ""
    return CanonicalError(
        f"{owner}{place} cannot be stored as JSON ({error}).",
        found=repr(found) if found is not None else None,
        expected="text, a finite number, an integer up to 2**53 - 1, true, false, null, a list or a table",
        next_step="Correct the field, or store null with a reason where the value is not known.",
    )


def _faults(value: Any, path: str) -> Iterator[tuple[str, object]]:
    """Yield path and value of every part without a canonical form."""
    if isinstance(value, dict):
        for name, part in value.items():
            if not isinstance(name, str) or _has_surrogate(name):
                yield f"{path}.{name!r}".lstrip("."), name
            yield from _faults(part, f"{path}.{name}".lstrip("."))
    elif isinstance(value, list | tuple):
        for index, part in enumerate(value):
            yield from _faults(part, f"{path}[{index}]")
    elif not _writable(value):
        yield path, value


def _writable(value: object) -> bool:
    if isinstance(value, str):
        return not _has_surrogate(value)
    if isinstance(value, float):
        return math.isfinite(value)
    if isinstance(value, int) and not isinstance(value, bool):
        return abs(value) <= _LARGEST
    return value is None or isinstance(value, bool)


def _has_surrogate(text: str) -> bool:
    return any("\ud800" <= character <= "\udfff" for character in text)
