"""Typed tables of the review's work: protocol, looks, analyses, versions, notices, decisions."""

from __future__ import annotations

from typing import Any, ClassVar

from sqlalchemy import BigInteger
from sqlmodel import Field

from treering.store.models_base import Body, json_column, whole_column


class Protocol(Body, table=True):
    """The protocol in force."""

    digest: str
    text: str | None = None


class Amendment(Body, table=True):
    """A dated change of the protocol."""

    date: str
    author: str | None = None
    clauses: Any = json_column()
    reason: str | None = None
    results_seen: bool | None = None


class Look(Body, table=True):
    """One look of the monitoring ledger."""

    synthesis: str
    number: int = Field(sa_type=BigInteger)
    date: str | None = None
    version: int | None = whole_column()
    trials: Any = json_column()
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
    version: int | None = whole_column()
    title: str | None = None
    measure: str | None = None
    scale: str | None = None
    role: str | None = None
    better: str | None = None
    unit: str | None = None
    k: int | None = whole_column()
    participants: float | None = None
    events: float | None = None
    pooled: Any = json_column()
    common: Any = json_column()


class Version(Body, table=True):
    """One version of the evidence."""

    version: int = Field(sa_type=BigInteger)
    date: str | None = None
    previous: Any = json_column()
    causes: Any = json_column()
    protocol_digest: str | None = None
    code_version: str | None = None
    entries: int = Field(sa_type=BigInteger)
    root: str


class Release(Body, table=True):
    """The pages of one version."""

    version: int = Field(sa_type=BigInteger)
    files: Any = json_column()


class Run(Body, table=True):
    """One run of the weekly update."""

    as_of: str
    version: int | None = whole_column()
    outcome: Any = json_column()
    returned: Any = json_column()
    waiting: Any = json_column()


class Notice(Body, table=True):
    """What one person is told."""

    version: int | None = whole_column()
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
    detail: Any = json_column()


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
    votes: Any = json_column()
    recusals: Any = json_column()
    date: str | None = None


class Withdrawal(Body, table=True):
    """Why an entry was withdrawn."""

    reason: str


class Defect(Body, table=True):
    """A defect of the tool and the versions it touches."""

    id: str
    description: str | None = None
    versions: Any = json_column()


class Simulation(Body, table=True):
    """What simulating the plan of one outcome found."""

    outcome: str
    plan_digest: str
    reviews: int | None = whole_column()
    seed: int | None = whole_column()
    exceeds: bool | None = None
