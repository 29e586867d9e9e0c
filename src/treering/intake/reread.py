"""Third readings of agreed numbers: which are drawn, and what came of them.

Two readers can agree on the same misreading, so a share of the agreed fields is read again by a third
person (the share stands in the protocol). The draw is by hash: nobody chooses it, and every machine that
holds the same readings draws the same fields. A third reading never holds a result back.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from treering.intake.compare import Difference, same_value
from treering.intake.view import StoredView

_RANGE = 2**64


def is_drawn(seed: str, share: float) -> bool:
    """Say whether a field with this seed is among the share that is read again."""
    place = int.from_bytes(hashlib.sha256(seed.encode()).digest()[:8], "big")
    return place < share * _RANGE


def drawn_fields(result: Mapping[str, Any], agreed: Sequence[str], share: float) -> tuple[str, ...]:
    """Return the agreed fields of a verified result that a third person reads again.

    Parameters
    ----------
    result : mapping
        Body of the result entry.
    agreed : sequence of str
        Number fields that both extractors read alike.
    share : float
        Share of fields to draw, 0 to 1.

    Returns
    -------
    tuple of str
        In the order of ``agreed``.
    """
    stem = f"{result['trial']}/{result['outcome']}/{result['report']}"
    return tuple(name for name in agreed if is_drawn(f"{stem}/{name}/{result['values'].get(name)!r}", share))


@dataclass(frozen=True, slots=True)
class ThirdReadings:
    """What the third readings of one result say: fields still to read, and differences found."""

    to_read: tuple[str, ...]
    confirmed: tuple[str, ...]
    differences: tuple[Difference, ...]
    readers: tuple[str, ...]


def third_readings(
    result: StoredView, fields: Sequence[str], readings: Sequence[StoredView], tolerance: float
) -> ThirdReadings:
    """Hold the third readings of a result against it.

    Parameters
    ----------
    result : stored entry
        The live result.
    fields : sequence of str
        Fields drawn for a third reading.
    readings : sequence of stored entries
        Live third readings of the trial and outcome; those of other reports say nothing here.
    tolerance : float
        Relative tolerance for measured numbers.

    Returns
    -------
    ThirdReadings
    """
    values = result.body["values"]
    same_report = [entry for entry in readings if entry.body["report"] == result.body["report"]]
    read: dict[str, Difference] = {}
    for entry in same_report:
        for name, number in entry.body["values"].items():
            place = (result.body["locators"].get(name), entry.body["locators"].get(name))
            read[name] = Difference(name, values.get(name), number, *place)
    differing = tuple(d for d in read.values() if not same_value(d.field, d.first, d.second, tolerance))
    wrong = {d.field for d in differing}
    return ThirdReadings(
        to_read=tuple(name for name in fields if name not in read),
        confirmed=tuple(name for name in read if name not in wrong),
        differences=differing,
        readers=tuple(str(entry.body["extractor"]) for entry in same_report),
    )
