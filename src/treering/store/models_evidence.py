"""Typed tables of the evidence: files, studies, readings, judgements, searches."""

from __future__ import annotations

from typing import Any, ClassVar

from treering.store.models_base import Body, json_column, whole_column


class Receipt(Body, table=True):
    """A file taken in."""

    file: str | None = None
    sha256: str
    size: int | None = whole_column()
    record: str | None = None


class Study(Body, table=True):
    """A trial."""

    trial: str
    title: str | None = None
    registration: Any = json_column()
    randomised: int | None = whole_column()
    design: str | None = None
    year: int | None = whole_column()
    funding: Any = json_column()
    interests: Any = json_column()


class Report(Body, table=True):
    """A document about a trial."""

    report: str
    trial: str | None = None
    form: str | None = None
    citation: str | None = None
    published: str | None = None
    identifier: Any = json_column()


class Arm(Body, table=True):
    """An arm of a trial."""

    trial: str
    arm: str
    label: str | None = None
    side: str | None = None
    randomised: int | None = whole_column()


class OutcomeDefinition(Body, table=True):
    """What is measured, and how."""

    __tablename__: ClassVar[Any] = "outcome_definition"

    outcome: str
    title: str | None = None
    measure: str | None = None
    better: str | None = None
    role: str | None = None
    unit: str | None = None
    window: Any = json_column()


class Extraction(Body, table=True):
    """What one extractor read."""

    trial: str
    outcome: str
    report: str | None = None
    extractor: str
    values: Any = json_column()
    locators: Any = json_column()
    origins: Any = json_column()
    note: str | None = None
    correction: str | None = None


class Adjudication(Body, table=True):
    """What the third person settled."""

    trial: str
    outcome: str
    adjudicator: str
    values: Any = json_column()
    locators: Any = json_column()
    reason_class: str | None = None
    reason: str | None = None
    unresolved: bool | None = None


class Verification(Body, table=True):
    """On what ground a result counts as verified."""

    trial: str
    outcome: str
    basis: str | None = None
    extractors: Any = json_column()
    adjudicator: str | None = None
    extractions: Any = json_column()
    adjudication: int | None = whole_column()
    fields: int | None = whole_column()
    differences: Any = json_column()
    reread: bool | None = None


class Result(Body, table=True):
    """The verified result that analyses use."""

    trial: str
    outcome: str
    report: str | None = None
    values: Any = json_column()
    locators: Any = json_column()
    verification: str | None = None
    subgroup: Any = json_column()


class Waiver(Body, table=True):
    """Leave to use a result read by one person."""

    trial: str
    outcome: str
    person: str | None = None
    reason: str | None = None


class RiskOfBias(Body, table=True):
    """Risk of bias of one result."""

    __tablename__: ClassVar[Any] = "risk_of_bias"

    trial: str
    outcome: str
    report: str | None = None
    domains: Any = json_column()
    overall: str | None = None
    support: Any = json_column()
    assessors: Any = json_column()


class Certainty(Body, table=True):
    """Certainty of the evidence for one outcome."""

    outcome: str
    rating: str | None = None
    reasons: Any = json_column()
    raters: Any = json_column()
    version: int | None = whole_column()
    numbers: Any = json_column()


class IntegrityNotice(Body, table=True):
    """A published notice about a trial's report."""

    __tablename__: ClassVar[Any] = "integrity_notice"

    trial: str
    report: str | None = None
    notice: str | None = None
    link: str | None = None
    reason: str | None = None
    seen_by: Any = json_column()


class SearchRun(Body, table=True):
    """One search of one source."""

    __tablename__: ClassVar[Any] = "search_run"

    source: str
    date: str | None = None
    strategy: str | None = None
    strategy_sha256: str | None = None
    hits: int | None = whole_column()
    new_hits: int | None = whole_column()
    error: str | None = None
    by: str | None = None


class Screening(Body, table=True):
    """Whether a report is in, and why."""

    report: str
    trial: str | None = None
    decision: str | None = None
    reason: str | None = None
    voters: Any = json_column()


class Ongoing(Body, table=True):
    """A trial that has not reported yet."""

    trial: str
    registration: Any = json_column()
    planned: int | None = whole_column()
    expected_end: str | None = None
    status: str | None = None
    outcomes: Any = json_column()
