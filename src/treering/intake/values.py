"""What passes between the steps of the intake: dropped files, records with their place, faults."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, field

from treering.records import AnyRecord


@dataclass(frozen=True, slots=True)
class Dropped:
    """One file as it lay in the intake folder.

    Parameters
    ----------
    name : str
        File name in the folder.
    content : bytes
        What stood in it when it was read.
    sha256 : str
        SHA-256 (hex) of the content.
    problem : str, optional
        Why the file can't be read at all.
    """

    name: str
    content: bytes = field(repr=False)
    sha256: str
    problem: str | None = None

    @classmethod
    def of(cls, name: str, content: bytes, problem: str | None = None) -> Dropped:
        """Make the value of a file with this name and content."""
        return cls(name, content, hashlib.sha256(content).hexdigest(), problem)

    @property
    def shown(self) -> str:
        """The name as text that can be printed and stored."""
        return self.name.encode("utf-8", "backslashreplace").decode()


@dataclass(frozen=True, slots=True, order=True)
class Fault:
    """One thing wrong in a file, in one sentence.

    Parameters
    ----------
    file : str
        Name of the file.
    where : str
        Row and column, or record and field; empty for the whole file.
    sentence : str
        What is wrong and what would be right.
    """

    file: str
    where: str
    sentence: str

    def __str__(self) -> str:
        """Return file, place and sentence."""
        place = f"{self.file}, {self.where}" if self.where else self.file
        return f"{place}: {self.sentence}"


@dataclass(frozen=True, slots=True, order=True)
class Remark(Fault):
    """Something a reviewer should look at; it holds nothing back."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where a record stands: the file, and the row or the number of the record in it."""

    file: str
    row: int | None = None
    number: int | None = None

    def where(self, path: str = "") -> str:
        """Return the place of a field of the record, in words."""
        if self.row is not None:
            return f"row {self.row}, column {path}" if path else f"row {self.row}"
        record = f"record {self.number}" if self.number is not None else ""
        return ", ".join(part for part in (record, path) if part)


@dataclass(frozen=True, slots=True)
class Located:
    """A record with its place."""

    record: AnyRecord
    place: Place

    def fault(self, path: str, sentence: str) -> Fault:
        """Make a fault of this record's field."""
        return Fault(self.place.file, self.place.where(path), sentence)

    def remark(self, path: str, sentence: str) -> Remark:
        """Make a remark on this record's field."""
        return Remark(self.place.file, self.place.where(path), sentence)

    def path(self, outcome: int, name: str) -> str:
        """Return the path of a field of one result of an extraction, as the file writes it."""
        return name if self.place.row is not None else f"results[{outcome + 1}].{name}"


@dataclass(frozen=True, slots=True)
class Parsed:
    """The files of one drop with the records read from them and what is wrong with them."""

    dropped: tuple[Dropped, ...]
    records: tuple[Located, ...]
    faults: tuple[Fault, ...]


@dataclass(frozen=True, slots=True)
class Checked:
    """The files of one drop, sorted by what becomes of them.

    Parameters
    ----------
    accepted : tuple of Dropped
        Files whose records go into the store.
    doubles : tuple of Dropped
        Files whose content is in the store already: only moved away.
    returned : tuple of Dropped
        Files with a fault: nothing of them is taken in.
    records : tuple of Located
        The records of the accepted files.
    faults : tuple of Fault
        Why the returned files go back.
    remarks : tuple of Remark
        What a reviewer should look at.
    """

    accepted: tuple[Dropped, ...]
    doubles: tuple[Dropped, ...]
    returned: tuple[Dropped, ...]
    records: tuple[Located, ...]
    faults: tuple[Fault, ...]
    remarks: tuple[Remark, ...]

    def faults_of(self, dropped: Dropped) -> tuple[Fault, ...]:
        """Return the faults of one file."""
        return tuple(fault for fault in self.faults if fault.file == dropped.shown)
