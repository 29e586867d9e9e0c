"""Judgements that people make: risk of bias, certainty, notices about a trial's report."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from treering.records.base import Day, Identifier, Number, OptionalText, Record, Text
from treering.terms import Judgement, NoticeKind

DOMAINS = ("randomisation", "deviations", "missing_data", "measurement", "selection")
"""The five domains of RoB 2 (Sterne et al., BMJ 2019;366:l4898), shortened."""

CERTAINTY_REASONS = (
    "risk_of_bias",
    "inconsistency",
    "indirectness",
    "imprecision",
    "publication_bias",
    "large_effect",
    "dose_response",
    "opposing_confounding",
)
_SEVERITY = {Judgement.LOW: 0, Judgement.SOME_CONCERNS: 1, Judgement.HIGH: 2}
TwoPeople = Annotated[tuple[Identifier, ...], Field(min_length=2)]


def _refuse_repeats(people: tuple[str, ...]) -> None:
    if len(set(people)) < len(people):
        raise ValueError("one person can't count twice")


class Domains(Record):
    """Judgement per domain."""

    randomisation: Judgement
    deviations: Judgement
    missing_data: Judgement
    measurement: Judgement
    selection: Judgement


class RiskOfBias(Record):
    """Two people's agreed judgement of one result."""

    record: Literal["risk-of-bias judgement"]
    trial: Identifier
    outcome: Identifier
    report: Identifier | None = None
    domains: Domains
    overall: Judgement
    support: dict[str, Text] = Field(default_factory=dict)
    assessors: TwoPeople
    date: Day

    @model_validator(mode="after")
    def _overall_is_no_better_than_the_worst_domain(self) -> Self:
        _refuse_repeats(self.assessors)
        strangers = sorted(set(self.support) - set(DOMAINS) - {"overall"})
        if strangers:
            raise ValueError(f"support names no domain: {', '.join(strangers)}")
        worst = max(DOMAINS, key=lambda name: _SEVERITY[getattr(self.domains, name)])
        found = getattr(self.domains, worst)
        if _SEVERITY[self.overall] < _SEVERITY[found]:
            raise ValueError(f"overall is {self.overall.value!r} though {worst} is {found.value!r}")
        return self

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return self.assessors


class Certainty(Record):
    """Two people's agreed rating of one outcome, bound to the version and numbers it was made on."""

    record: Literal["certainty judgement"]
    outcome: Identifier
    rating: Literal["High", "Moderate", "Low", "Very low"]
    reasons: dict[str, Text] = Field(default_factory=dict)
    raters: TwoPeople
    version: Annotated[int, Field(ge=1, strict=True)]
    numbers: dict[str, Number] = Field(default_factory=dict)
    date: Day

    @model_validator(mode="after")
    def _reasons_are_known(self) -> Self:
        _refuse_repeats(self.raters)
        strangers = sorted(set(self.reasons) - set(CERTAINTY_REASONS))
        if strangers:
            raise ValueError(
                f"unknown reason for rating: {', '.join(strangers)}; known: {', '.join(CERTAINTY_REASONS)}"
            )
        if self.rating != "High" and not self.reasons:
            raise ValueError("a rating below High needs its reasons")
        return self

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return self.raters


class IntegrityNotice(Record):
    """A published notice about a trial's report, in neutral words."""

    record: Literal["integrity notice"]
    trial: Identifier
    report: Identifier | None = None
    notice: NoticeKind
    date: Day
    link: OptionalText = None
    reason: Text
    seen_by: Identifier

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.seen_by,)
