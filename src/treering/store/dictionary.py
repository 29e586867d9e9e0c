"""The data dictionary of an export: what each column holds, for readers who know nothing of treering.

Types are those of the Table Schema of the Data Package standard (Frictionless Data); "any" marks JSON that
may be a text, a list or a table.
"""

from __future__ import annotations

from typing import Any

from sqlalchemy import JSON, BigInteger, Boolean, Float, Integer

from treering.store.models import METADATA, TABLES
from treering.store.projection import BODY_FIELDS
from treering.terms import EntryKind

ENVELOPE: dict[str, tuple[str, str]] = {
    "seq": ("integer", "Place of the entry in the ledger, from 0; line seq + 1 of entries.jsonl."),
    "key": ("string", "Name of what the entry is about; at most one entry on a key is live."),
    "live": ("boolean", "Whether no entry of this export replaces or withdraws it."),
    "known_at": ("datetime", "When the team knew it: start of the run that laid it down, UTC."),
    "true_at": ("date", "Since when it is true in the world."),
    "by": ("string", "Id of the person it comes from, or treering."),
    "cause": ("string", "Why a number may differ because of it."),
    "reason": ("string", "The reason in words."),
    "replaces": ("integer", "seq of the entry that it replaces or withdraws."),
    "hash": ("string", "SHA-256 of the canonical bytes, hexadecimal; the next entry names it."),
}
"""Columns that every table has."""

MORE = ("object", "Fields of the entry that have no column of their own, as JSON.")

_LOOK = "Look of the monitoring plan: "

FIELDS: dict[str, str | tuple[str, str]] = {
    "address": "Where the notice is sent.",
    "adjudication": "seq of the adjudication that settled what differed.",
    "adjudicator": "Id of the person who settled what two readings differ in.",
    "alpha_spent": _LOOK + "type I error spent so far.",
    "arm": "Id of the arm within its trial.",
    "as_of": "Date and time the run was made for.",
    "assessors": ("array", "Ids of the people who judged."),
    "author": "Id of the person who changed the protocol.",
    "basis": "On what ground the result counts as verified: agreed, adjudicated or waiver.",
    "better": "Which direction of the outcome is good for patients: lower or higher.",
    "boundary": _LOOK + "boundary for z; empty when the look has none.",
    "by": "Id of the person who ran the search.",
    "causes": ("array", "Why the version was laid down."),
    "channel": "How the notice is sent.",
    "citation": "The report in words.",
    "clauses": ("array", "Clauses of the protocol that were changed."),
    "code_version": "Version of treering that computed it.",
    "common": ("object", "Common-effect estimate on the analysis scale, with its interval and tests."),
    "correction": "Why an earlier reading is corrected.",
    "date": "ISO date.",
    "decision": "What was decided.",
    "description": "What is wrong with the tool.",
    "design": "Design of the trial: parallel, cluster or crossover.",
    "detail": ("any", "What the channel answered."),
    "differences": ("array", "Fields in which the two readings differ."),
    "digest": "SHA-256 of the protocol.",
    "domains": ("object", "Judgement by domain of bias."),
    "entries": "Number of entries before the version: the size of its head.",
    "error": "Why the search failed.",
    "estimate": _LOOK + "pooled estimate on the analysis scale.",
    "event": "Why the person is told something.",
    "events": "Events in both arms of the trials in the main analysis.",
    "exceeds": "Whether the simulated plan errs more often than it may.",
    "expected_end": "When the trial is expected to end.",
    "extractions": ("array", "seq of the readings that the verification rests on."),
    "extractor": "Id of the person who read the report.",
    "extractors": ("array", "Ids of the people whose readings it rests on."),
    "fields": "Number of fields compared.",
    "file": "Name of the file taken in.",
    "files": ("object", "Name of each released file to its SHA-256."),
    "form": "Form of the report, such as article or preprint.",
    "fraction": _LOOK + "information as a share of what is required.",
    "funding": ("any", "Who paid for the trial."),
    "hits": "Number of records the search found.",
    "id": "Id of the defect.",
    "identifier": ("any", "Identifier of the report, such as a DOI."),
    "information": _LOOK + "statistical information, 1 / variance.",
    "interests": ("any", "Declared interests of the trial's authors."),
    "k": "Number of trials in the main analysis.",
    "label": "What the arm was given.",
    "link": "Where the notice was published.",
    "locators": ("object", "Field to the place in the report where it was read."),
    "measure": "Effect measure, such as risk-ratio; ratios are analysed on the log scale.",
    "new_hits": "Number of records not found before.",
    "note": "Remark of the reader.",
    "notice": "Key of the notice, or the sort of notice that a journal published.",
    "number": _LOOK + "its number within the synthesis.",
    "numbers": ("object", "Numbers that the judgement was made on."),
    "origins": ("object", "Field to how it was obtained: as printed, computed or read from a figure."),
    "outcome": "Id of the outcome, or what came of the run.",
    "outcomes": ("array", "Outcomes that the trial will report."),
    "overall": "Overall judgement: Low, Some concerns or High.",
    "p": _LOOK + "P value of the planned test.",
    "participants": "People in the trials of the main analysis.",
    "person": "Id of the person.",
    "plan_digest": "SHA-256 of the monitoring plan in force.",
    "planned": "Number of people the trial plans to randomise.",
    "pooled": ("object", "Planned estimate on the analysis scale, with its interval and tests."),
    "previous": ("any", "Number of the version before."),
    "protocol_digest": "SHA-256 of the protocol the version was made by.",
    "published": "ISO date at which the report appeared.",
    "randomised": "Number of people randomised.",
    "raters": ("array", "Ids of the people who rated the certainty."),
    "rating": "Certainty of the evidence.",
    "reason": "The reason in words.",
    "reason_class": "Class of the reason why the readings differed.",
    "reasons": ("object", "Reasons for the rating, by domain."),
    "recommendation": "Id of the recommendation.",
    "record": "Sort of record the file holds.",
    "recusals": ("any", "Who did not vote, and why."),
    "registration": ("any", "Number in a trial register."),
    "report": "Id of the report.",
    "required": _LOOK + "information required.",
    "reread": "Whether a third reading confirmed the drawn fields.",
    "results_seen": "Whether results were known when the protocol was changed.",
    "returned": ("array", "Files given back, with their faults."),
    "reviews": "Number of reviews simulated.",
    "role": "Whether the outcome is watched for benefit or for harm.",
    "root": "Root of the Merkle tree over the entries before the version (RFC 9162), hexadecimal.",
    "scale": "Analysis scale: log for ratios, plain for differences.",
    "seed": "Seed of the simulation.",
    "seen_by": ("any", "Id of the person who found the notice."),
    "sha256": "SHA-256 of the file.",
    "side": "intervention or comparator.",
    "size": "Size of the file in bytes.",
    "source": "What was searched.",
    "spends": _LOOK + "whether it spends alpha.",
    "standard_error": _LOOK + "standard error of the estimate on the analysis scale.",
    "status": "State of the trial.",
    "strategy": "The search in the words of the source.",
    "strategy_sha256": "SHA-256 of the strategy.",
    "subgroup": ("object", "Name of each subgroup factor to the level of this result."),
    "subject": "Subject of the notice.",
    "support": ("object", "What supports the judgement, by domain."),
    "synthesis": "Id of the outcome that is pooled.",
    "text": "The whole text.",
    "title": "Title.",
    "trial": "Id of the trial.",
    "trials": ("array", "Ids of the trials in the look."),
    "unit": "Unit of the outcome.",
    "unresolved": "Whether the adjudicator left the difference open.",
    "values": ("object", "Field to number, as read."),
    "verdict": _LOOK + "its verdict.",
    "verification": "Key of the verification that the result rests on.",
    "version": "Number of the version.",
    "versions": ("array", "Versions that the defect touches."),
    "voters": ("any", "Ids of the people who decided."),
    "votes": ("any", "How the panel voted."),
    "waiting": ("array", "Results that wait, and why."),
    "window": ("any", "Time after randomisation within which the outcome counts."),
    "year": "Year in which the trial was first reported.",
    "z": _LOOK + "signed normal quantile of the planned test's P value.",
}
"""What the fields of bodies hold; with the type of those that are JSON."""


def table_name(kind: EntryKind) -> str:
    """Return the name of the table of a kind, which is the name of its file.

    Parameters
    ----------
    kind : EntryKind
        Kind of entry.

    Returns
    -------
    str
        Small letters and underscores.
    """
    return str(TABLES[kind].__tablename__)


def envelope_names(kind: EntryKind) -> dict[str, str]:
    """Return how the columns that every table has are called in the table of a kind.

    Parameters
    ----------
    kind : EntryKind
        Kind of entry.

    Returns
    -------
    dict of str to str
        Name to column; one that a field of the body bears is called entry_NAME.
    """
    taken = BODY_FIELDS[kind]
    return {name: f"entry_{name}" if name in taken else name for name in ENVELOPE}


def schema_of(kind: EntryKind) -> dict[str, Any]:
    """Return the Table Schema of the table of a kind.

    Parameters
    ----------
    kind : EntryKind
        Kind of entry.

    Returns
    -------
    dict
        Fields in the order of the columns, with type and description.
    """
    labels = envelope_names(kind)
    fields = [
        {"name": labels[name], "type": sort, "description": text} for name, (sort, text) in ENVELOPE.items()
    ]
    columns = METADATA.tables[table_name(kind)].columns
    for name in BODY_FIELDS[kind]:
        about = FIELDS[name]
        text = about if isinstance(about, str) else about[1]
        fields.append({"name": name, "type": _type(columns[name].type, about), "description": text})
    fields.append({"name": "more", "type": MORE[0], "description": MORE[1]})
    return {"fields": fields, "primaryKey": labels["seq"], "missingValues": [""]}


def _type(column: Any, about: str | tuple[str, str]) -> str:
    if isinstance(column, JSON):
        return "any" if isinstance(about, str) else about[0]
    if isinstance(column, Boolean):
        return "boolean"
    if isinstance(column, Float):
        return "number"
    return "integer" if isinstance(column, BigInteger | Integer) else "string"
