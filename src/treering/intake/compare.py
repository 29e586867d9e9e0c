"""Two readings of one result, field by field."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from treering.records import COUNT_FIELDS, VALUE_FIELDS

Reading = Mapping[str, Any]
"""The body of an extraction entry."""

SHARED_FACTS = ("registration", "published", "randomised", "design")


@dataclass(frozen=True, slots=True)
class Difference:
    """A field in which two readings differ; None means not reported.

    ``first`` and ``second`` are what the two readers wrote, ``*_place`` where in the report they found it.
    """

    field: str
    first: Any
    second: Any
    first_place: str | None = None
    second_place: str | None = None

    def to_dict(self) -> dict[str, Any]:
        """Return the difference as a verification entry keeps it."""
        return {"field": self.field, "first": self.first, "second": self.second}


@dataclass(frozen=True, slots=True)
class Comparison:
    """What two readings have in common and where they differ.

    Parameters
    ----------
    agreed : tuple of str
        Number fields that both read alike, within the tolerance.
    differences : tuple of Difference
        Fields that someone must settle.
    tolerated : tuple of Difference
        Numbers that are unequal but within the protocol's tolerance; the first reading stands.
    """

    agreed: tuple[str, ...]
    differences: tuple[Difference, ...]
    tolerated: tuple[Difference, ...]


def same_number(first: float, second: float, tolerance: float) -> bool:
    """Say whether two numbers differ by at most ``tolerance`` relative to the larger one."""
    return abs(first - second) <= tolerance * max(abs(first), abs(second))


def same_value(name: str, first: float | None, second: float | None, tolerance: float) -> bool:
    """Say whether two readings of one number field agree; counts must be equal."""
    if first is None or second is None:
        return first is second
    return same_number(first, second, 0.0 if name in COUNT_FIELDS else tolerance)


def _plain(value: Any) -> Any:
    return value.strip().casefold() if isinstance(value, str) else value


def _numbers(first: Reading, second: Reading, tolerance: float) -> Comparison:
    agreed, differences, tolerated = [], [], []
    for name in VALUE_FIELDS:
        one, other = first["values"].get(name), second["values"].get(name)
        if one is None and other is None:
            continue
        places = (first["locators"].get(name), second["locators"].get(name))
        difference = Difference(name, one, other, *places)
        if not same_value(name, one, other, tolerance):
            differences.append(difference)
            continue
        agreed.append(name)
        if one != other:
            tolerated.append(difference)
    return Comparison(tuple(agreed), tuple(differences), tuple(tolerated))


def same_fact(name: str, first: Any, second: Any) -> bool:
    """Say whether two readers wrote the same of a fact; "2025" and "2025-03-14" do not contradict."""
    one, other = _plain(first), _plain(second)
    if name == "published":
        short, long = sorted((str(one), str(other)), key=len)
        return long == short or long.startswith(f"{short}-")
    return bool(one == other)


def _facts(first: Reading, second: Reading) -> list[Difference]:
    """Find facts about the trial that both give and give differently; one may leave a fact out."""
    found = []
    for name in SHARED_FACTS:
        one, other = first["study"].get(name), second["study"].get(name)
        if one is not None and other is not None and not same_fact(name, one, other):
            found.append(Difference(f"study.{name}", one, other))
    return found


def _subgroups(first: Reading, second: Reading) -> list[Difference]:
    one, other = first["subgroup"], second["subgroup"]
    return [
        Difference(f"subgroup.{name}", one.get(name), other.get(name))
        for name in sorted({*one, *other})
        if _plain(one.get(name)) != _plain(other.get(name))
    ]


def _arms(first: Reading, second: Reading) -> list[Difference]:
    def shape(reading: Reading) -> list[tuple[Any, ...]]:
        return [(arm["arm"], arm["side"], arm["randomised"]) for arm in reading["arms"]]

    one, other = shape(first), shape(second)
    if not one or not other or one == other:
        return []
    return [Difference("arms", list(first["arms"]), list(second["arms"]))]


def _usability(first: Reading, second: Reading) -> list[Difference]:
    one, other = first["not_usable"], second["not_usable"]
    return [] if (one is None) == (other is None) else [Difference("not_usable", one, other)]


def compare_readings(first: Reading, second: Reading, *, tolerance: float = 0.0) -> Comparison:
    """Compare two readings of one result.

    Parameters
    ----------
    first, second : mapping
        Bodies of two extraction entries of one trial and outcome.
    tolerance : float
        Relative difference up to which two measured numbers count as equal; counts must be equal.

    Returns
    -------
    Comparison
        A number that only one reader gives is a difference: zero and "not reported" are kept apart.
    """
    numbers = _numbers(first, second, tolerance)
    others = (
        *_usability(first, second),
        *_subgroups(first, second),
        *_facts(first, second),
        *_arms(first, second),
    )
    return Comparison(numbers.agreed, (*numbers.differences, *others), numbers.tolerated)
