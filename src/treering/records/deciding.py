"""What comes back from the panel, and the taking back of an entry."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from treering.records.base import Day, Identifier, Record, Text


class PanelDecision(Record):
    """What the panel decided about one recommendation."""

    record: Literal["panel decision"]
    recommendation: Identifier
    decision: Literal["no change", "reword", "change strength", "change direction", "await"]
    reason: Text
    votes: dict[Text, Annotated[int, Field(ge=0, strict=True)]] = Field(default_factory=dict)
    recusals: tuple[Identifier, ...] = ()
    date: Day
    recorded_by: Identifier

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.recorded_by,)


class Acknowledgement(Record):
    """A panel member has seen a notice; ``notice`` is the key printed on it."""

    record: Literal["acknowledgement"]
    notice: Text
    person: Identifier
    date: Day

    def people(self) -> tuple[str, ...]:
        """Return nobody of the review team: the signer sits on the panel."""
        return ()


class Withdrawal(Record):
    """An entry is taken back; its place in the store stays marked."""

    record: Literal["withdrawal"]
    key: Text
    reason: Text
    by: Identifier
    date: Day

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.by,)
