"""From the body of an entry to the row of its typed table, by the types of the table's columns."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from sqlalchemy import JSON, BigInteger, Boolean, Column, Float, Integer

from treering.errors import StoreError
from treering.store.canonical import sorted_encoder
from treering.store.models import KEY_PREFIXES, TABLES
from treering.terms import EntryKind

_LARGEST = 2**53 - 1
_ENCODE = sorted_encoder()


class _Unfit(ValueError):
    """The value does not fit its column."""


def _text(value: Any) -> str:
    if not isinstance(value, str) or "\x00" in value:
        raise _Unfit("text without NUL characters")
    return value if type(value) is str else str.__str__(value)


def _whole(value: Any) -> int:
    if (
        isinstance(value, bool)
        or not isinstance(value, int | float)
        or abs(value) > _LARGEST
        or value != int(value)
    ):
        raise _Unfit("a whole number up to 2**53 - 1")
    return int(value)


def _real(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise _Unfit("a number")
    return float(value)


def _truth(value: Any) -> bool:
    if not isinstance(value, bool):
        raise _Unfit("true or false")
    return value


def _same(value: Any) -> Any:
    return value


def _converter(column: Column[Any]) -> Callable[[Any], Any]:
    """Return what turns a JSON value into the value of a column."""
    if isinstance(column.type, JSON):
        return _same
    if isinstance(column.type, Boolean):
        return _truth
    if isinstance(column.type, Float):
        return _real
    return _whole if isinstance(column.type, BigInteger | Integer) else _text


def _columns(kind: EntryKind) -> tuple[Column[Any], ...]:
    table = TABLES[kind].__table__  # type: ignore[attr-defined]
    return tuple(column for column in table.columns if column.name != "entry")


_PLANS = {
    kind: tuple(
        (column.name, _converter(column), not column.nullable, isinstance(column.type, JSON))
        for column in _columns(kind)
    )
    for kind in EntryKind
}

BODY_FIELDS: dict[str, tuple[str, ...]] = {
    str(kind): tuple(name for name, *_ in plan) for kind, plan in _PLANS.items()
}
"""Kind to the fields of its body that have a column, in the order of the columns."""


def project(kind: EntryKind, seq: int, body: Mapping[str, Any], *, key: str) -> tuple[Any, ...]:
    """Return the row of the typed table of one entry, as the database driver takes it.

    Parameters
    ----------
    kind : EntryKind
        Kind of the entry.
    seq : int
        Its place in the ledger.
    body : mapping
        Its body; must have a canonical form.
    key : str
        Its key, for the message of an error.

    Returns
    -------
    tuple
        Sequence number and the fields of :data:`BODY_FIELDS` in order; lists and tables as JSON text.

    Raises
    ------
    StoreError
        When a field that names the entry is missing, or a value does not fit its column.
    """
    row: list[Any] = [seq]
    for name, convert, required, is_json in _PLANS[kind]:
        value = body.get(name)
        if value is None:
            if required:
                raise _missing(kind, key, name)
        elif is_json:
            value = _ENCODE(value)
        else:
            try:
                value = convert(value)
            except _Unfit as error:
                raise _unfit(kind, key, name, value, str(error)) from error
        row.append(value)
    return tuple(row)


def typed_values(kind: EntryKind, seq: int, body: Mapping[str, Any], *, key: str) -> dict[str, Any]:
    """Return the typed row of one entry by column, lists and tables as plain values.

    Parameters
    ----------
    kind, seq, body, key
        As for :func:`project`; the body as read from the canonical bytes.

    Returns
    -------
    dict
        What :meth:`EvidenceStore.typed_rows` must give for this entry.

    Raises
    ------
    StoreError
        As for :func:`project`.
    """
    row = project(kind, seq, body, key=key)
    values = dict(zip(("entry", *BODY_FIELDS[kind]), row, strict=True))
    for name, _, _, is_json in _PLANS[kind]:
        if is_json:
            values[name] = body.get(name)
    return values


def check_key(kind: EntryKind, key: str) -> None:
    """Check that a key begins as the keys of its kind do.

    Parameters
    ----------
    kind : EntryKind
        Kind of the entry.
    key : str
        Its key.

    Raises
    ------
    StoreError
        When it does not, or holds a NUL character.
    """
    prefix = KEY_PREFIXES[kind]
    if not key.startswith(prefix) or not key or "\x00" in key:
        raise StoreError(
            f"A {kind} cannot be stored under this key.",
            found=key,
            expected=f"a key that begins with {prefix}" if prefix else "the key of what is withdrawn",
            next_step="This is a fault of the caller; report it.",
        )


def _missing(kind: EntryKind, key: str, name: str) -> StoreError:
    return StoreError(
        f"{kind} {key}: field {name} is missing.",
        expected="a value; this field says what the entry is about",
        next_step="Give the field and append again; nothing was stored.",
    )


def _unfit(kind: EntryKind, key: str, name: str, value: object, expected: str) -> StoreError:
    return StoreError(
        f"{kind} {key}: field {name} does not fit its column.",
        found=repr(value),
        expected=expected,
        next_step="Correct the field and append again; nothing was stored.",
    )
