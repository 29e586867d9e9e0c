"""What reviewers hand in, as validated values, and the entry each turns into.

The records are frozen and refuse unknown fields; they know the vocabulary and nothing else, so both the
intake and the store can use :class:`NewEntry` without knowing each other.
"""

from treering.records.base import Record, last_day
from treering.records.deciding import Acknowledgement, PanelDecision, Withdrawal
from treering.records.entry import NewEntry
from treering.records.extraction import (
    COUNT_FIELDS,
    MEASURED_FIELDS,
    VALUE_FIELDS,
    Arm,
    Extraction,
    Report,
    Result,
    Values,
)
from treering.records.judgements import DOMAINS, Certainty, IntegrityNotice, RiskOfBias
from treering.records.searching import Ongoing, Screening, SearchRun
from treering.records.settling import Adjudication, Waiver

AnyRecord = (
    Extraction
    | Adjudication
    | Waiver
    | RiskOfBias
    | Certainty
    | IntegrityNotice
    | SearchRun
    | Screening
    | Ongoing
    | PanelDecision
    | Acknowledgement
    | Withdrawal
)

RECORDS: dict[str, type[AnyRecord]] = {
    "extraction": Extraction,
    "adjudication": Adjudication,
    "waiver": Waiver,
    "risk-of-bias judgement": RiskOfBias,
    "certainty judgement": Certainty,
    "integrity notice": IntegrityNotice,
    "search run": SearchRun,
    "screening decision": Screening,
    "ongoing trial": Ongoing,
    "panel decision": PanelDecision,
    "acknowledgement": Acknowledgement,
    "withdrawal": Withdrawal,
}
"""The kinds of record by the word that stands in the file's ``record`` field."""

__all__ = [
    "COUNT_FIELDS",
    "DOMAINS",
    "MEASURED_FIELDS",
    "RECORDS",
    "VALUE_FIELDS",
    "Acknowledgement",
    "Adjudication",
    "AnyRecord",
    "Arm",
    "Certainty",
    "Extraction",
    "IntegrityNotice",
    "NewEntry",
    "Ongoing",
    "PanelDecision",
    "Record",
    "Report",
    "Result",
    "RiskOfBias",
    "Screening",
    "SearchRun",
    "Values",
    "Waiver",
    "Withdrawal",
    "last_day",
]
