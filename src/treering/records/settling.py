"""How two readings become one result: a third person's decision, or a recorded waiver."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import BeforeValidator, Field, model_validator

from treering.records.base import (
    Identifier,
    OptionalDay,
    OptionalText,
    Positive,
    Record,
    Text,
    Whole,
    WrittenDate,
    written_text,
)
from treering.records.extraction import VALUE_FIELDS, Arm, Design, FieldTexts, Values

ReasonClass = Literal["slip", "ambiguity", "rule gap", "report conflict"]


class SettledFacts(Record):
    """Facts about the trial on which the two readers differed, as settled."""

    registration: OptionalText = None
    published: WrittenDate = None
    randomised: Positive = None
    design: Annotated[Design | None, BeforeValidator(written_text)] = None


class Adjudication(Record):
    """What the third person found in the source where two readings differ.

    ``values`` holds the settled numbers, ``not_reported`` the fields that the report does not give.
    ``unresolved`` leaves the difference open: a legal state, and the result waits.
    """

    record: Literal["adjudication"]
    trial: Identifier
    outcome: Identifier
    adjudicator: Identifier
    values: Values = Values()
    not_reported: tuple[str, ...] = ()
    not_usable: OptionalText = None
    study: SettledFacts = SettledFacts()
    subgroups: dict[Identifier, Text] = Field(default_factory=dict)
    arms: tuple[Arm, ...] = ()
    locator: OptionalText = None
    locators: FieldTexts = Field(default_factory=dict)
    reason_class: ReasonClass
    reason: Text
    unresolved: bool = False
    minutes: Whole = None
    date: OptionalDay = None

    @model_validator(mode="after")
    def _is_a_decision(self) -> Self:
        strangers = sorted((set(self.not_reported) | set(self.locators)) - set(VALUE_FIELDS))
        if strangers:
            raise ValueError(f"no result has these fields: {', '.join(strangers)}")
        both = sorted(set(self.not_reported) & set(self.values.numbers()))
        if both:
            raise ValueError(f"given a number and called not reported: {', '.join(both)}")
        unplaced = sorted(n for n in self.values.numbers() if not (self.locator or n in self.locators))
        if unplaced and not self.unresolved:
            raise ValueError(f"say where each settled number stands (locator): {', '.join(unplaced)}")
        return self

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.adjudicator,)

    def places(self) -> dict[str, str]:
        """Return the place in the report for each settled number."""
        given = {name: self.locators.get(name, self.locator) for name in self.values.numbers()}
        return {name: place for name, place in given.items() if place}


class Waiver(Record):
    """A signed and printed exception: one extraction is enough for this result."""

    record: Literal["waiver"]
    trial: Identifier
    outcome: Identifier
    person: Identifier
    reason: Text
    date: OptionalDay = None

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.person,)
