"""What an audit reports: numbered checks, each with the faults it found."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from treering.errors import AuditError, StoreError

MOST_FAULTS = 25
"""Faults told of per check; of a badly damaged store the first ones say enough."""

COMPARE = "The ledger was altered outside treering: compare it with a copy and with a printed head."
RESTORE = "The table was altered outside treering: import an export, or take the last copy that passes."

TITLES = {
    1: "schema and triggers",
    2: "numbering without gaps",
    3: "hashes of the canonical bytes",
    4: "links from entry to entry",
    5: "columns and typed tables against the canonical bytes",
    6: "Merkle tree: heads of versions and kept nodes",
    7: "what entries replace and name",
    8: "roles: nobody holds two on one trial and outcome",
    9: "analyses, looks and pages belong to stored versions",
    10: "head against checkpoints",
    11: "released pages on disk",
}
"""Number of each check to what it looks at."""


@dataclass(frozen=True, slots=True)
class Check:
    """One numbered check of an audit.

    Parameters
    ----------
    number : int
        As in :data:`TITLES`.
    faults : tuple of str
        One text per fault: entry, version, what was found and expected, next step.
    seen : str
        What the check went through, or why it was not made.
    """

    number: int
    faults: tuple[str, ...]
    seen: str

    @property
    def title(self) -> str:
        """What the check looks at."""
        return TITLES[self.number]

    @property
    def holds(self) -> bool:
        """Whether no fault was found."""
        return not self.faults

    def line(self) -> str:
        """Return the check as one line for people.

        Returns
        -------
        str
            Number, title, outcome and extent.
        """
        outcome = "holds" if self.holds else "fails"
        return f"{self.number:>2}  {outcome}  {self.title}" + (f" ({self.seen})" if self.seen else "")

    def to_dict(self) -> dict[str, Any]:
        """Return the check as plain values.

        Returns
        -------
        dict
            number, title, holds, seen and faults.
        """
        return {
            "number": self.number,
            "title": self.title,
            "holds": self.holds,
            "seen": self.seen,
            "faults": list(self.faults),
        }


@dataclass(slots=True)
class _Finding:
    """A fault before it is known which version it falls into."""

    message: str
    seq: int | None
    version: int | None
    found: object
    expected: object
    step: str


class Findings:
    """Gathers the faults of an audit; which version an entry belongs to is known at its end only."""

    def __init__(self) -> None:
        self.seen: dict[int, str] = {}
        self._faults: dict[int, list[_Finding]] = {}
        self._more: dict[int, int] = {}

    def add(
        self,
        check: int,
        message: str,
        *,
        seq: int | None = None,
        version: int | None = None,
        found: object = None,
        expected: object = None,
        step: str = COMPARE,
    ) -> None:
        """Note one fault.

        Parameters
        ----------
        check : int
            Number of the check.
        message : str
            What is wrong, in one sentence.
        seq : int, optional
            Entry it concerns; the version is told from it.
        version : int, optional
            Version it concerns.
        found, expected : object, optional
            What was met and what would have been right.
        step : str, optional
            What the reader should do.
        """
        faults = self._faults.setdefault(check, [])
        if len(faults) < MOST_FAULTS:
            faults.append(_Finding(message, seq, version, found, expected, step))
        else:
            self._more[check] = self._more.get(check, 0) + 1

    @contextmanager
    def guarded(self, check: int) -> Iterator[None]:
        """Turn a refusal of the database during a check into a fault of that check.

        Parameters
        ----------
        check : int
            Number of the check.

        Yields
        ------
        None
        """
        self.seen.setdefault(check, "")
        try:
            yield
        except StoreError as error:
            if undecodable(error):
                raise
            self.add(check, f"The check could not be made: {error}", step="")
        except UnicodeDecodeError as error:
            # SQLite's own message quotes the damaged place, and Python cannot read that.
            self.add(check, f"The check could not be made: the database is damaged ({error}).")

    def checks(self, versions: Sequence[tuple[int, int]] = ()) -> list[Check]:
        """Return the checks begun so far.

        Parameters
        ----------
        versions : sequence of (size, number)
            Entries before each version and its number, in order.

        Returns
        -------
        list of Check
            In the order of their numbers.
        """
        version_of = _finder(versions)
        made = []
        for number in sorted(self.seen):
            faults = [_text(fault, version_of) for fault in self._faults.get(number, ())]
            if number in self._more:
                faults.append(f"and {self._more[number]} more faults of this check.")
            made.append(Check(number, tuple(faults), self.seen[number]))
        return made


def undecodable(error: BaseException) -> bool:
    """Tell whether SQLite stopped at text that is no UTF-8.

    Parameters
    ----------
    error : BaseException
        As it left the store.

    Returns
    -------
    bool
        Such a text can be read with replacement signs only.
    """
    return "decode to UTF-8" in str(error)


def _finder(versions: Sequence[tuple[int, int]]) -> Callable[[int], str]:
    sizes = [size for size, _ in versions]

    def version_of(seq: int) -> str:
        place = bisect_left(sizes, seq)
        if place < len(sizes):
            return f"version {versions[place][1]}"
        return "after the last version" if versions else "no version yet"

    return version_of


def _text(fault: _Finding, version_of: Callable[[int], str]) -> str:
    place = f"entry {fault.seq} ({version_of(fault.seq)}): " if fault.seq is not None else ""
    error = AuditError(
        place + fault.message,
        version=fault.version,
        found=_short(fault.found),
        expected=_short(fault.expected),
        next_step=fault.step or None,
    )
    # What was damaged may hold signs that no terminal takes.
    return str(error).encode("utf-8", "backslashreplace").decode()


def _short(value: object) -> object:
    if value is None:
        return None
    text = value if isinstance(value, str) else repr(value)
    return text if len(text) <= 120 else text[:117] + "..."
