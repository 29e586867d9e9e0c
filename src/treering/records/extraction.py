"""One person's reading of the results of one report."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import BeforeValidator, Field, model_validator

from treering.records.base import (
    Identifier,
    Number,
    OptionalText,
    Positive,
    Record,
    Text,
    Whole,
    WrittenDate,
    Year,
    last_day,
    written_text,
)

COUNT_FIELDS = (
    "intervention_events",
    "intervention_total",
    "comparator_events",
    "comparator_total",
    "clusters",
)
MEASURED_FIELDS = (
    "intervention_mean",
    "intervention_sd",
    "comparator_mean",
    "comparator_sd",
    "intervention_time",
    "comparator_time",
    "estimate",
    "ci_low",
    "ci_high",
    "ci_level",
    "standard_error",
    "log_estimate",
    "p_value",
    "observed_minus_expected",
    "variance_oe",
    "mean_cluster_size",
    "icc",
)
VALUE_FIELDS = COUNT_FIELDS + MEASURED_FIELDS
"""The numbers of one result, in the words that tables, files and reports share."""

Design = Literal["parallel", "cluster", "crossover"]
ReportForm = Literal["article", "preprint", "register entry", "erratum", "companion", "letter"]
Origin = Literal["reported", "converted", "read off a graph", "from authors", "imputed"]
FieldTexts = dict[str, Text]


class Values(Record):
    """The numbers of one result; absent means not reported, 0 means that zero was reported."""

    intervention_events: Whole = None
    intervention_total: Whole = None
    comparator_events: Whole = None
    comparator_total: Whole = None
    clusters: Whole = None
    intervention_mean: Number = None
    intervention_sd: Number = None
    comparator_mean: Number = None
    comparator_sd: Number = None
    intervention_time: Number = None
    comparator_time: Number = None
    estimate: Number = None
    ci_low: Number = None
    ci_high: Number = None
    ci_level: Number = None
    standard_error: Number = None
    log_estimate: Number = None
    p_value: Number = None
    observed_minus_expected: Number = None
    variance_oe: Number = None
    mean_cluster_size: Number = None
    icc: Number = None

    def numbers(self) -> dict[str, float | int]:
        """Return the reported numbers by field name."""
        read = ((name, getattr(self, name)) for name in VALUE_FIELDS)
        return {name: value for name, value in read if value is not None}


class Result(Values):
    """What one person read for one outcome.

    ``locator`` says where in the report the numbers stand; ``locators`` does so for single fields;
    ``origins`` says which fields were not printed as such; ``not_usable`` says why the result can't be
    analysed: the trial then stays included and listed.
    """

    outcome: Identifier
    locator: OptionalText = None
    locators: FieldTexts = Field(default_factory=dict)
    origins: dict[str, Origin] = Field(default_factory=dict)
    note: OptionalText = None
    not_usable: OptionalText = None

    @model_validator(mode="after")
    def _texts_belong_to_fields(self) -> Self:
        for name, texts in (("locators", self.locators), ("origins", self.origins)):
            strangers = sorted(set(texts) - set(VALUE_FIELDS))
            if strangers:
                raise ValueError(f"{name} names fields that no result has: {', '.join(strangers)}")
        return self

    def places(self) -> dict[str, str]:
        """Return the place in the report for each reported number that has one."""
        given = {name: self.locators.get(name, self.locator) for name in self.numbers()}
        return {name: place for name, place in given.items() if place}


class Report(Record):
    """The document that was read."""

    id: Identifier
    form: ReportForm | None = None
    citation: OptionalText = None
    identifier: OptionalText = None


class Arm(Record):
    """One arm of the trial as randomised."""

    arm: Identifier
    label: OptionalText = None
    side: Literal["intervention", "comparator"]
    randomised: Whole = None


class StudyFacts(Record):
    """Facts about the trial that do not differ by outcome."""

    title: OptionalText = None
    registration: OptionalText = None
    published: WrittenDate = None
    year: Year = None
    randomised: Positive = None
    design: Annotated[Design | None, BeforeValidator(written_text)] = None
    funding: OptionalText = None
    interests: OptionalText = None

    @model_validator(mode="after")
    def _year_is_the_year_of_the_date(self) -> Self:
        if self.published and self.year and last_day(self.published).year != self.year:
            raise ValueError(f"year {self.year} is not the year of published {self.published}")
        return self

    def appeared(self) -> str | None:
        """Return when the report appeared, as precisely as the reader could say."""
        return self.published or (f"{self.year:04d}" if self.year else None)


class Extraction(StudyFacts):
    """One person's reading of one report, for one or more outcomes.

    ``correction`` says why a reading replaces one that is already there. ``third_reading`` marks a
    check of agreed numbers by a third person.
    """

    record: Literal["extraction"]
    trial: Identifier
    extractor: Identifier
    report: Report
    arms: tuple[Arm, ...] = ()
    subgroups: dict[Identifier, Text] = Field(default_factory=dict)
    correction: OptionalText = None
    third_reading: bool = False
    results: Annotated[tuple[Result, ...], Field(min_length=1)]

    @model_validator(mode="after")
    def _names_stand_once(self) -> Self:
        for what, names in (
            ("outcome", [r.outcome for r in self.results]),
            ("arm", [a.arm for a in self.arms]),
        ):
            twice = sorted({n for n in names if names.count(n) > 1})
            if twice:
                raise ValueError(f"{what} stands twice in one record: {', '.join(twice)}")
        return self

    def people(self) -> tuple[str, ...]:
        """Return who signs this record."""
        return (self.extractor,)
