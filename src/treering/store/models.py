"""The tables: one ledger, one typed table for each kind of entry, the tree's inner nodes, the store itself.

The ledger holds the canonical bytes and is the evidence. A typed table repeats the body of its kind in
columns with real types, for queries; it can be rebuilt from the bytes at any time and is compared with them
by the audit. Its columns bear the names of the body's fields. Fields without a column stay in the bytes.
Dates are ISO text on every database, so that they compare and print alike.
"""

from __future__ import annotations

from typing import Any, ClassVar

from sqlalchemy import JSON, BigInteger, Index, LargeBinary
from sqlmodel import Field, SQLModel

from treering.terms import EntryKind


class Store(SQLModel, table=True):
    """The review this store belongs to; one row."""

    id: int = Field(primary_key=True)
    review: str
    format: int


class Entry(SQLModel, table=True):
    """The ledger: one row for each entry, never changed."""

    __table_args__: ClassVar[Any] = (
        Index("entry_key", "key"),
        Index("entry_replaces", "replaces", unique=True),
    )

    seq: int = Field(primary_key=True, sa_column_kwargs={"autoincrement": False})
    kind: str
    key: str
    true_at: str
    known_at: str
    by: str
    cause: str | None = None
    reason: str | None = None
    replaces: int | None = Field(default=None, foreign_key="entry.seq")
    hash: bytes = Field(sa_type=LargeBinary)
    canonical: bytes = Field(sa_type=LargeBinary)


class TreeNode(SQLModel, table=True):
    """Inner nodes of the Merkle tree from level 8 upwards; lower ones are computed from the entries."""

    __tablename__: ClassVar[Any] = "tree_node"

    level: int = Field(primary_key=True)
    position: int = Field(primary_key=True, sa_type=BigInteger)
    hash: bytes = Field(sa_type=LargeBinary)


class Body(SQLModel):
    """What every typed table shares: the entry it repeats."""

    entry: int = Field(primary_key=True, foreign_key="entry.seq", sa_column_kwargs={"autoincrement": False})


def _json() -> Any:
    return Field(default=None, sa_type=JSON, nullable=True)


def _whole() -> Any:
    return Field(default=None, sa_type=BigInteger, nullable=True)


class Receipt(Body, table=True):
    """A file taken in."""

    file: str | None = None
    sha256: str
    size: int | None = _whole()
    record: str | None = None


class Study(Body, table=True):
    """A trial."""

    trial: str
    title: str | None = None
    registration: Any = _json()
    randomised: int | None = _whole()
    design: str | None = None
    year: int | None = _whole()
    funding: Any = _json()
    interests: Any = _json()


class Report(Body, table=True):
    """A document about a trial."""

    report: str
    trial: str | None = None
    form: str | None = None
    citation: str | None = None
    published: str | None = None
    identifier: Any = _json()


class Arm(Body, table=True):
    """An arm of a trial."""

    trial: str
    arm: str
    label: str | None = None
    side: str | None = None
    randomised: int | None = _whole()


class OutcomeDefinition(Body, table=True):
    """What is measured, and how."""

    __tablename__: ClassVar[Any] = "outcome_definition"

    outcome: str
    title: str | None = None
    measure: str | None = None
    better: str | None = None
    role: str | None = None
    unit: str | None = None
    window: Any = _json()


class Extraction(Body, table=True):
    """What one extractor read."""

    trial: str
    outcome: str
    report: str | None = None
    extractor: str
    values: Any = _json()
    locators: Any = _json()
    origins: Any = _json()
    note: str | None = None
    correction: str | None = None


class Adjudication(Body, table=True):
    """What the third person settled."""

    trial: str
    outcome: str
    adjudicator: str
    values: Any = _json()
    locators: Any = _json()
    reason_class: str | None = None
    reason: str | None = None
    unresolved: bool | None = None


class Verification(Body, table=True):
    """On what ground a result counts as verified."""

    trial: str
    outcome: str
    basis: str | None = None
    extractors: Any = _json()
    adjudicator: str | None = None
    extractions: Any = _json()
    adjudication: int | None = _whole()
    fields: int | None = _whole()
    differences: Any = _json()
    reread: bool | None = None


class Result(Body, table=True):
    """The verified result that analyses use."""

    trial: str
    outcome: str
    report: str | None = None
    values: Any = _json()
    locators: Any = _json()
    verification: str | None = None
    subgroup: Any = _json()


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
    domains: Any = _json()
    overall: str | None = None
    support: Any = _json()
    assessors: Any = _json()


class Certainty(Body, table=True):
    """Certainty of the evidence for one outcome."""

    outcome: str
    rating: str | None = None
    reasons: Any = _json()
    raters: Any = _json()
    version: int | None = _whole()
    numbers: Any = _json()


class IntegrityNotice(Body, table=True):
    """A published notice about a trial's report."""

    __tablename__: ClassVar[Any] = "integrity_notice"

    trial: str
    report: str | None = None
    notice: str | None = None
    link: str | None = None
    reason: str | None = None
    seen_by: Any = _json()


class SearchRun(Body, table=True):
    """One search of one source."""

    __tablename__: ClassVar[Any] = "search_run"

    source: str
    date: str | None = None
    strategy: str | None = None
    strategy_sha256: str | None = None
    hits: int | None = _whole()
    new_hits: int | None = _whole()
    error: str | None = None
    by: str | None = None


class Screening(Body, table=True):
    """Whether a report is in, and why."""

    report: str
    trial: str | None = None
    decision: str | None = None
    reason: str | None = None
    voters: Any = _json()


class Ongoing(Body, table=True):
    """A trial that has not reported yet."""

    trial: str
    registration: Any = _json()
    planned: int | None = _whole()
    expected_end: str | None = None
    status: str | None = None
    outcomes: Any = _json()


class Protocol(Body, table=True):
    """The protocol in force."""

    digest: str
    text: str | None = None


class Amendment(Body, table=True):
    """A dated change of the protocol."""

    date: str
    author: str | None = None
    clauses: Any = _json()
    reason: str | None = None
    results_seen: bool | None = None


class Look(Body, table=True):
    """One look of the monitoring ledger."""

    synthesis: str
    number: int = Field(sa_type=BigInteger)
    date: str | None = None
    version: int | None = _whole()
    trials: Any = _json()
    estimate: float | None = None
    standard_error: float | None = None
    information: float | None = None
    required: float | None = None
    fraction: float | None = None
    z: float | None = None
    p: float | None = None
    spends: bool | None = None
    alpha_spent: float | None = None
    boundary: float | None = None
    verdict: str | None = None
    plan_digest: str | None = None


class Analysis(Body, table=True):
    """The analysis of one synthesis at one version; the details stay in the bytes."""

    synthesis: str
    version: int | None = _whole()
    title: str | None = None
    measure: str | None = None
    scale: str | None = None
    role: str | None = None
    better: str | None = None
    unit: str | None = None
    k: int | None = _whole()
    participants: float | None = None
    events: float | None = None
    pooled: Any = _json()
    common: Any = _json()


class Version(Body, table=True):
    """One version of the evidence."""

    version: int = Field(sa_type=BigInteger)
    date: str | None = None
    previous: Any = _json()
    causes: Any = _json()
    protocol_digest: str | None = None
    code_version: str | None = None
    entries: int = Field(sa_type=BigInteger)
    root: str


class Release(Body, table=True):
    """The pages of one version."""

    version: int = Field(sa_type=BigInteger)
    files: Any = _json()


class Run(Body, table=True):
    """One run of the weekly update."""

    as_of: str
    version: int | None = _whole()
    outcome: Any = _json()
    returned: Any = _json()
    waiting: Any = _json()


class Notice(Body, table=True):
    """What one person is told."""

    version: int | None = _whole()
    synthesis: str | None = None
    event: str
    person: str
    channel: str | None = None
    address: str | None = None
    subject: str | None = None
    text: str | None = None


class Delivery(Body, table=True):
    """A notice that left."""

    notice: str
    person: str | None = None
    channel: str | None = None
    detail: Any = _json()


class Acknowledgement(Body, table=True):
    """A notice that was read."""

    notice: str
    person: str | None = None
    date: str | None = None


class PanelDecision(Body, table=True):
    """What the panel decided."""

    __tablename__: ClassVar[Any] = "panel_decision"

    recommendation: str
    decision: str | None = None
    reason: str | None = None
    votes: Any = _json()
    recusals: Any = _json()
    date: str | None = None


class Withdrawal(Body, table=True):
    """Why an entry was withdrawn."""

    reason: str


class Defect(Body, table=True):
    """A defect of the tool and the versions it touches."""

    id: str
    description: str | None = None
    versions: Any = _json()


METADATA = SQLModel.metadata
"""All tables above."""

TABLES: dict[EntryKind, type[Body]] = {
    EntryKind.RECEIPT: Receipt,
    EntryKind.STUDY: Study,
    EntryKind.REPORT: Report,
    EntryKind.ARM: Arm,
    EntryKind.OUTCOME: OutcomeDefinition,
    EntryKind.EXTRACTION: Extraction,
    EntryKind.ADJUDICATION: Adjudication,
    EntryKind.VERIFICATION: Verification,
    EntryKind.RESULT: Result,
    EntryKind.WAIVER: Waiver,
    EntryKind.RISK_OF_BIAS: RiskOfBias,
    EntryKind.CERTAINTY: Certainty,
    EntryKind.INTEGRITY: IntegrityNotice,
    EntryKind.SEARCH: SearchRun,
    EntryKind.SCREENING: Screening,
    EntryKind.ONGOING: Ongoing,
    EntryKind.PROTOCOL: Protocol,
    EntryKind.AMENDMENT: Amendment,
    EntryKind.LOOK: Look,
    EntryKind.ANALYSIS: Analysis,
    EntryKind.VERSION: Version,
    EntryKind.RELEASE: Release,
    EntryKind.RUN: Run,
    EntryKind.NOTICE: Notice,
    EntryKind.DELIVERY: Delivery,
    EntryKind.ACKNOWLEDGEMENT: Acknowledgement,
    EntryKind.PANEL_DECISION: PanelDecision,
    EntryKind.WITHDRAWAL: Withdrawal,
    EntryKind.DEFECT: Defect,
}
"""Kind of entry to the typed table that repeats its body; every kind has one."""

KEY_PREFIXES: dict[EntryKind, str] = {
    EntryKind.RECEIPT: "receipt/",
    EntryKind.STUDY: "study/",
    EntryKind.REPORT: "report/",
    EntryKind.ARM: "arm/",
    EntryKind.OUTCOME: "outcome/",
    EntryKind.EXTRACTION: "extraction/",
    EntryKind.ADJUDICATION: "adjudication/",
    EntryKind.VERIFICATION: "verification/",
    EntryKind.RESULT: "result/",
    EntryKind.WAIVER: "waiver/",
    EntryKind.RISK_OF_BIAS: "bias/",
    EntryKind.CERTAINTY: "certainty/",
    EntryKind.INTEGRITY: "integrity/",
    EntryKind.SEARCH: "search/",
    EntryKind.SCREENING: "screening/",
    EntryKind.ONGOING: "ongoing/",
    EntryKind.PROTOCOL: "protocol",
    EntryKind.AMENDMENT: "amendment/",
    EntryKind.LOOK: "look/",
    EntryKind.ANALYSIS: "analysis/",
    EntryKind.VERSION: "version/",
    EntryKind.RELEASE: "release/",
    EntryKind.RUN: "run/",
    EntryKind.NOTICE: "notice/",
    EntryKind.DELIVERY: "delivery/",
    EntryKind.ACKNOWLEDGEMENT: "acknowledgement/",
    EntryKind.PANEL_DECISION: "decision/",
    EntryKind.WITHDRAWAL: "",
    EntryKind.DEFECT: "defect/",
}
"""How the keys of each kind begin."""
