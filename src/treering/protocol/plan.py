"""config/review.toml as values: questions, outcomes, pooling, monitoring, verification, people, amendments.

Everything that can change a number sits in :meth:`Protocol.plan`, whose SHA-256 is the protocol digest
printed with every version.
"""

from __future__ import annotations

import hashlib
import math
from datetime import date
from typing import Annotated, Any, Literal, Self

import rfc8785
from pydantic import Field, model_validator

from treering.protocol.base import Identifier, Part, Share, Text
from treering.terms import (
    RATIO_MEASURES,
    Better,
    Correction,
    IntervalMethod,
    Measure,
    OutcomeRole,
    PersonRole,
    PoolingModel,
    Spending,
    Tau2,
)


class Person(Part):
    """One member of the review team."""

    id: Identifier
    name: Text
    roles: tuple[PersonRole, ...]
    own_trials: tuple[Identifier, ...] = ()


class Pooling(Part):
    """How the trials of one outcome are pooled."""

    method: Literal["inverse-variance", "mantel-haenszel"] = "inverse-variance"
    model: PoolingModel = PoolingModel.RANDOM
    tau2: Tau2 = Tau2.REML
    interval: IntervalMethod = IntervalMethod.MODIFIED_KNAPP_HARTUNG
    level: Annotated[float, Field(gt=0.5, lt=1)] = 0.95
    prediction_df: Literal["k-2", "k-1"] = "k-2"
    correction: Correction = Correction.NONE
    correction_amount: Annotated[float, Field(gt=0, le=1)] = 0.5


class Monitoring(Part):
    """How one outcome is monitored; ``effect`` is on the natural scale (a ratio, or a difference)."""

    effect: float
    effect_reason: Text
    alpha: Annotated[float, Field(gt=0, lt=0.5)] = 0.05
    sides: Literal[1, 2] = 2
    power: Annotated[float, Field(gt=0, lt=1)] = 0.9
    spending: Spending = Spending.OBRIEN_FLEMING
    spending_parameter: float | None = None
    diversity: Annotated[float, Field(ge=0, lt=1)] = 0.0
    diversity_reason: Text
    futility: bool = False
    tau2_range: tuple[Annotated[float, Field(ge=0)], ...] = (0.0,)
    prior_sd: Annotated[float, Field(gt=0)] | None = None


class Outcome(Part):
    """One outcome of the review; each is one synthesis."""

    id: Identifier
    title: Text
    question: Text
    measure: Measure
    role: OutcomeRole
    better: Better
    unit: str = ""
    window: str = ""
    minimally_important: float
    comparator_risk: Annotated[float, Field(gt=0, lt=1)] | None = None
    subgroups: tuple[Identifier, ...] = ()
    pooling: Pooling = Pooling()
    monitoring: Monitoring | None = None

    @property
    def is_ratio(self) -> bool:
        """Whether the analysis scale is the log scale."""
        return self.measure in RATIO_MEASURES

    def on_analysis_scale(self, value: float) -> float:
        """Turn a natural-scale effect into one on the analysis scale."""
        return math.log(value) if self.is_ratio else value

    @model_validator(mode="after")
    def _effects_are_usable(self) -> Self:
        pairs = [("minimally_important", self.minimally_important)]
        if self.monitoring:
            pairs.append(("monitoring.effect", self.monitoring.effect))
            if self.monitoring.power <= self.monitoring.alpha:
                raise ValueError("monitoring.power must be above monitoring.alpha")
            if self.role is OutcomeRole.HARM and self.monitoring.futility:
                raise ValueError("a harm has no futility stop: set monitoring.futility to false")
            if self.pooling.method != "inverse-variance":
                raise ValueError(
                    "looks are defined for inverse-variance pooling; for rare events use measure 'peto-odds-"
                    "ratio' with model 'common', which is inverse-variance pooling of Peto's estimate"
                )
        for name, value in pairs:
            if self.is_ratio and value <= 0:
                raise ValueError(f"{name} is a ratio and must be above 0 (found {value:g})")
            if self.on_analysis_scale(value) == 0:
                raise ValueError(f"{name} is the no-effect value (found {value:g}); name an effect to detect")
        return self


class Verification(Part):
    """How extractions become verified results."""

    extractors: Literal[2] = 2
    reread_share: Share = 0.10
    relative_tolerance: Annotated[float, Field(ge=0, lt=0.1)] = 0.0
    concern: Literal["keep and flag", "hold"] = "keep and flag"


class Living(Part):
    """Parameters of the living mode: how often the steps are due and when living ends."""

    update_every_days: Annotated[int, Field(ge=1)] = 7
    search_every_days: dict[str, Annotated[int, Field(ge=1)]] = Field(default_factory=dict)
    certainty_reread_days: Annotated[int, Field(ge=1)] = 183
    report_lag_days: Annotated[int, Field(ge=0)] = 365
    retirement_rule: str = ""


class Amendment(Part):
    """A dated change of the plan."""

    date: date
    author: Identifier
    clauses: tuple[str, ...]
    reason: Text
    results_seen: bool


class ReviewHead(Part):
    """What the review is."""

    id: Identifier
    title: Text
    question: Text
    intervention: Text
    comparator: Text
    invented: bool = False
    registration: str = ""
    protocol_link: str = ""
    funding: str = ""
    contact: str = ""


class StorePlace(Part):
    """Where the evidence store is; empty means store/evidence.sqlite in the review folder."""

    url: str = ""


class Delivery(Part):
    """Outgoing channels that notices may use besides the file outbox."""

    smtp_host: str = ""
    smtp_port: Annotated[int, Field(ge=1, le=65535)] = 25
    smtp_starttls: bool = False
    smtp_user: str = ""
    smtp_password_variable: str = ""
    sender: str = ""


class Protocol(Part):
    """The whole of config/review.toml."""

    format: Literal[1]
    review: ReviewHead
    living: Living = Living()
    verification: Verification = Verification()
    people: tuple[Person, ...]
    outcomes: Annotated[tuple[Outcome, ...], Field(min_length=1)]
    amendments: tuple[Amendment, ...] = ()
    store: StorePlace = StorePlace()
    delivery: Delivery = Delivery()

    @model_validator(mode="after")
    def _names_are_unique(self) -> Self:
        for what, names in (
            ("person", [p.id for p in self.people]),
            ("outcome", [o.id for o in self.outcomes]),
        ):
            twice = sorted({n for n in names if names.count(n) > 1})
            if twice:
                raise ValueError(f"{what} id stands twice: {', '.join(twice)}")
        return self

    def plan(self) -> dict[str, Any]:
        """Return everything that can change a number or a verdict, as plain JSON values."""
        return self.model_dump(mode="json", exclude={"store", "delivery", "people", "amendments", "living"})

    def digest(self) -> str:
        """SHA-256 (hex) over the canonical bytes of :meth:`plan`."""
        return hashlib.sha256(rfc8785.dumps(self.plan())).hexdigest()

    def person(self, person_id: str) -> Person | None:
        """Return the team member with this id, or None."""
        return next((p for p in self.people if p.id == person_id), None)

    def outcome(self, outcome_id: str) -> Outcome | None:
        """Return the outcome with this id, or None."""
        return next((o for o in self.outcomes if o.id == outcome_id), None)
