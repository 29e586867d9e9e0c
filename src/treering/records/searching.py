"""What the search and the screening leave: runs, decisions, trials still going on."""

from __future__ import annotations

import hashlib
from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from treering.records.base import Day, Identifier, OptionalDay, OptionalText, Positive, Record, Text, Whole


class SearchRun(Record):
    """One run of one source: what was asked, what came, or why it failed."""

    record: Literal["search run"]
    source: Text
    date: Day
    strategy: Text
    hits: Whole = None
    new_hits: Whole = None
    error: OptionalText = None
    by: Identifier

    @model_validator(mode="after")
    def _counts_or_error(self) -> Self:
        if "/" in self.source:
            raise ValueError("a source can't hold a slash in its name")
        if self.error is None and (self.hits is None or self.new_hits is None):
            raise ValueError("say hits and new_hits, or the error that stopped the search")
        if self.hits is not None and self.new_hits is not None and self.new_hits > self.hits:
            raise ValueError(f"new_hits {self.new_hits} is above hits {self.hits}")
        return self

    def strategy_sha256(self) -> str:
        """SHA-256 (hex) of the strategy's text."""
        return hashlib.sha256(self.strategy.encode()).hexdigest()

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.by,)


class Screening(Record):
    """Two people's decision on one report."""

    record: Literal["screening decision"]
    report: Identifier
    trial: Identifier | None = None
    decision: Literal["include", "exclude", "awaiting", "ongoing"]
    reason: OptionalText = None
    citation: OptionalText = None
    voters: Annotated[tuple[Identifier, ...], Field(min_length=2)]
    date: Day

    @model_validator(mode="after")
    def _is_two_people_and_a_reason(self) -> Self:
        if len(set(self.voters)) < len(self.voters):
            raise ValueError("one person can't count as two voters")
        if self.decision == "exclude" and not self.reason:
            raise ValueError("an exclusion needs its reason")
        return self

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return self.voters


class Ongoing(Record):
    """A trial that is registered and has not reported yet."""

    record: Literal["ongoing trial"]
    trial: Identifier
    registration: OptionalText = None
    planned: Positive = None
    expected_end: OptionalDay = None
    status: Literal["planned", "recruiting", "completed", "stopped", "unknown"]
    outcomes: tuple[Identifier, ...] = ()
    by: Identifier
    date: Day

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.by,)
