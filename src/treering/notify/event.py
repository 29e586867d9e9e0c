"""What the panel may be told of one version."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from treering.terms import EventClass

Body = Mapping[str, Any]


@dataclass(frozen=True)
class Event:
    """Something in one version that asks the panel to look.

    Parameters
    ----------
    event : EventClass
        What it is.
    synthesis : str
        Outcome id.
    version : int
        Number of the version.
    date : str
        ISO date of the version.
    body : mapping
        Analysis body of the synthesis in this version.
    previous : mapping or None
        Analysis body in the version before.
    changes : mapping
        What changed in the synthesis, with ``causes``.
    head_size : int
        Number of entries under the store head that the version names.
    head_root : str
        Root hash of the store head, hexadecimal.
    told_before : tuple of str
        Persons who were told of the crossing that is now lost; they are told whatever they follow.
    defect : mapping
        Of a defect of the program: ``id``, ``description``, ``versions`` (those it touched) and ``again``
        (what computing them again now gives, a sentence).
    """

    event: EventClass
    synthesis: str
    version: int
    date: str
    body: Body
    previous: Body | None = None
    changes: Body = field(default_factory=dict)
    head_size: int = 0
    head_root: str = ""
    told_before: tuple[str, ...] = ()
    defect: Body = field(default_factory=dict)

    @property
    def slug(self) -> str:
        """The event's name in keys and file names."""
        name = self.event.value.replace(" ", "-")
        return f"{name}-{self.defect['id']}" if self.defect else name

    @property
    def title(self) -> str:
        """The outcome's name for readers, on one line."""
        return " ".join(str(self.body.get("title") or self.synthesis).split())
