"""The tables: one ledger, one typed table for each kind of entry, the tree's inner nodes, the store itself.

The ledger holds the canonical bytes and is the evidence. A typed table repeats the body of its kind in
columns with real types, for queries; it can be rebuilt from the bytes at any time and is compared with them
by the audit. Its columns bear the names of the body's fields. Fields without a column stay in the bytes.
Dates are ISO text on every database, so that they compare and print alike.
"""

from __future__ import annotations

from typing import Any, ClassVar

from sqlalchemy import BigInteger, Index, LargeBinary
from sqlmodel import Field, SQLModel

from treering.store.models_base import Body
from treering.store.models_evidence import (
    Adjudication,
    Arm,
    Certainty,
    Extraction,
    IntegrityNotice,
    Ongoing,
    OutcomeDefinition,
    Receipt,
    Report,
    Result,
    RiskOfBias,
    Screening,
    SearchRun,
    Study,
    Verification,
    Waiver,
)
from treering.store.models_work import (
    Acknowledgement,
    Amendment,
    Analysis,
    Defect,
    Delivery,
    Look,
    Notice,
    PanelDecision,
    Protocol,
    Release,
    Run,
    Simulation,
    Version,
    Withdrawal,
)
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
    EntryKind.SIMULATION: Simulation,
}
"""Kind of entry to the typed table that repeats its body; every kind has one.

A new kind needs a model, a line here, a line in `KEY_PREFIXES` and a migration of its own: stores of earlier
code have the tables of their revision only, and the golden store of the tests shows when that is forgotten.
"""

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
    EntryKind.SIMULATION: "simulation/",
}
"""How the keys of each kind begin."""
