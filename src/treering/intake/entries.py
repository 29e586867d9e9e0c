"""Checked records to the entries that the store lays down. Pure."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date
from typing import Any

from treering.intake import bodies
from treering.intake.values import Checked, Dropped
from treering.intake.view import StateView
from treering.protocol import Protocol
from treering.records import (
    Acknowledgement,
    Adjudication,
    AnyRecord,
    Certainty,
    Extraction,
    IntegrityNotice,
    NewEntry,
    Ongoing,
    PanelDecision,
    RiskOfBias,
    Screening,
    SearchRun,
    Waiver,
    Withdrawal,
    last_day,
)
from treering.terms import Cause, EntryKind, NoticeKind

# Readings come before what settles them: an adjudication counts for the readings it follows.
_ORDER = (
    EntryKind.RECEIPT,
    EntryKind.SEARCH,
    EntryKind.SCREENING,
    EntryKind.ONGOING,
    EntryKind.EXTRACTION,
    EntryKind.WAIVER,
    EntryKind.ADJUDICATION,
    EntryKind.RISK_OF_BIAS,
    EntryKind.CERTAINTY,
    EntryKind.INTEGRITY,
    EntryKind.PANEL_DECISION,
    EntryKind.ACKNOWLEDGEMENT,
    EntryKind.WITHDRAWAL,
)
_WITHDRAWAL_CAUSES = {
    EntryKind.RESULT: Cause.CORRECTION,
    EntryKind.RISK_OF_BIAS: Cause.RISK_OF_BIAS,
    EntryKind.CERTAINTY: Cause.CERTAINTY,
    EntryKind.INTEGRITY: Cause.INTEGRITY_NOTICE,
}


def entries_for(checked: Checked, protocol: Protocol, view: StateView, known_date: str) -> list[NewEntry]:
    """Make the entries of the accepted files: their records, and one receipt a file.

    Parameters
    ----------
    checked : Checked
        What the check let through.
    protocol : Protocol
        The protocol (its outcomes are those the check held the records against).
    view : StateView
        The state of the store before these entries.
    known_date : str
        ISO date of the run.

    Returns
    -------
    list of NewEntry
        In an order that does not depend on file names: by kind, then key.
    """
    made = [_receipt(dropped, checked, known_date) for dropped in checked.accepted]
    for located in checked.records:
        made += _of(located.record, view, known_date)
    return sorted(made, key=lambda entry: (_ORDER.index(entry.kind), entry.key))


def _receipt(dropped: Dropped, checked: Checked, known_date: str) -> NewEntry:
    kinds = sorted({item.record.record for item in checked.records if item.place.file == dropped.shown})
    body = {
        "file": dropped.shown,
        "sha256": dropped.sha256,
        "size": len(dropped.content),
        "record": ", ".join(kinds),
    }
    return NewEntry(EntryKind.RECEIPT, f"receipt/{dropped.sha256}", body, true_at=known_date)


def _of(record: AnyRecord, view: StateView, known_date: str) -> Iterator[NewEntry]:
    """Yield the entries of one record; only an extraction has more than one."""
    if isinstance(record, Extraction):
        yield from _extractions(record, view, known_date)
    elif isinstance(record, Withdrawal):
        yield _withdrawal(record, view)
    else:
        yield _single(record, view, known_date)


def _entry(
    view: StateView,
    kind: EntryKind,
    key: str,
    body: dict[str, Any],
    when: date | str,
    by: str,
    *,
    cause: Cause | None = None,
    reason: str | None = None,
) -> NewEntry:
    live = view.get(key)
    true_at = when if isinstance(when, str) else when.isoformat()
    replaces = live.seq if live else None
    return NewEntry(kind, key, body, true_at, by, cause=cause, reason=reason, replaces=replaces)


def _extractions(record: Extraction, view: StateView, known_date: str) -> Iterator[NewEntry]:
    report = view.get(f"report/{record.report.id}")
    appeared = record.appeared()
    known = report.body["published"] if report else None
    when = min(last_day(appeared).isoformat(), known_date) if appeared else known or known_date
    for result in record.results:
        cause, reason = extraction_cause(record, result.outcome, view)
        key = f"extraction/{record.trial}/{result.outcome}/{record.extractor}"
        body = bodies.extraction_body(record, result)
        yield _entry(
            view, EntryKind.EXTRACTION, key, body, when, record.extractor, cause=cause, reason=reason
        )


def extraction_cause(record: Extraction, outcome: str, view: StateView) -> tuple[Cause | None, str | None]:
    """Say why a reading can move a number.

    Parameters
    ----------
    record : Extraction
        The reading.
    outcome : str
        The outcome it reads.
    view : StateView
        The state of the store.

    Returns
    -------
    Cause or None, str or None
        The cause and its reason; no cause for a third reading, which moves nothing.
    """
    if record.third_reading:
        return None, "third reading"
    live = view.get(f"result/{record.trial}/{outcome}")
    if live is None:
        return Cause.NEW_TRIAL, record.correction
    if record.correction:
        return Cause.CORRECTION, record.correction
    if live.body["report"] != record.report.id:
        return Cause.NEW_REPORT, f"report {record.report.id} follows {live.body['report']}"
    return Cause.CORRECTION, "a second reading replaces a waiver"


def _withdrawal(record: Withdrawal, view: StateView) -> NewEntry:
    live = view.get(record.key)
    return NewEntry(
        kind=EntryKind.WITHDRAWAL,
        key=record.key,
        body={"reason": record.reason},
        true_at=record.date.isoformat(),
        by=record.by,
        cause=_WITHDRAWAL_CAUSES.get(live.kind) if live else None,
        reason=record.reason,
        replaces=live.seq if live else None,
    )


def _single(record: AnyRecord, view: StateView, known_date: str) -> NewEntry:
    match record:
        case Adjudication():
            key = f"adjudication/{record.trial}/{record.outcome}"
            body = bodies.adjudication_body(record)
            when = record.date or known_date
            return _entry(view, EntryKind.ADJUDICATION, key, body, when, record.adjudicator)
        case Waiver():
            key = f"waiver/{record.trial}/{record.outcome}"
            body = bodies.waiver_body(record)
            when = record.date or known_date
            return _entry(view, EntryKind.WAIVER, key, body, when, record.person, reason=record.reason)
        case RiskOfBias():
            return _risk_of_bias(record, view)
        case Certainty():
            body, by = bodies.certainty_body(record), min(record.raters)
            key, cause = f"certainty/{record.outcome}", Cause.CERTAINTY
            return _entry(view, EntryKind.CERTAINTY, key, body, record.date, by, cause=cause)
        case IntegrityNotice():
            return _integrity(record, view)
        case _:
            return _unmoving(record, view)


def _risk_of_bias(record: RiskOfBias, view: StateView) -> NewEntry:
    result = view.get(f"result/{record.trial}/{record.outcome}")
    body = bodies.risk_of_bias_body(record, result.body["report"] if result else None)
    key, by = f"bias/{record.trial}/{record.outcome}", min(record.assessors)
    return _entry(view, EntryKind.RISK_OF_BIAS, key, body, record.date, by, cause=Cause.RISK_OF_BIAS)


def _integrity(record: IntegrityNotice, view: StateView) -> NewEntry:
    key = f"integrity/{record.trial}/{record.date.isoformat()}/{record.notice.value}"
    retracted = record.notice is NoticeKind.RETRACTION
    cause = Cause.RETRACTION if retracted else Cause.INTEGRITY_NOTICE
    return _entry(
        view,
        EntryKind.INTEGRITY,
        key,
        bodies.integrity_body(record),
        record.date,
        record.seen_by,
        cause=cause,
        reason=record.reason,
    )


def _unmoving(record: AnyRecord, view: StateView) -> NewEntry:
    """Make the entry of a record that moves no number."""
    match record:
        case SearchRun():
            key = f"search/{record.source}/{record.date.isoformat()}"
            return _entry(view, EntryKind.SEARCH, key, bodies.search_body(record), record.date, record.by)
        case Screening():
            key, by = f"screening/{record.report}", min(record.voters)
            body = bodies.screening_body(record)
            return _entry(view, EntryKind.SCREENING, key, body, record.date, by, reason=record.reason)
        case Ongoing():
            key, body = f"ongoing/{record.trial}", bodies.ongoing_body(record)
            return _entry(view, EntryKind.ONGOING, key, body, record.date, record.by)
        case PanelDecision():
            key = f"decision/{record.recommendation}/{record.date.isoformat()}"
            body, by = bodies.decision_body(record), record.recorded_by
            return _entry(view, EntryKind.PANEL_DECISION, key, body, record.date, by)
        case Acknowledgement():
            key, body = f"acknowledgement/{record.notice}", bodies.acknowledgement_body(record)
            return _entry(view, EntryKind.ACKNOWLEDGEMENT, key, body, record.date, record.person)
        case _:
            raise TypeError(f"no entry is made of a {type(record).__name__}")
