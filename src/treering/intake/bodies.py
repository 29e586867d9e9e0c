"""The bodies of entries that come straight from records."""

from __future__ import annotations

from typing import Any

from treering.records import (
    Acknowledgement,
    Adjudication,
    Arm,
    Certainty,
    Extraction,
    IntegrityNotice,
    Ongoing,
    PanelDecision,
    Result,
    RiskOfBias,
    Screening,
    SearchRun,
    Waiver,
)

Body = dict[str, Any]


def _arm(arm: Arm) -> Body:
    return arm.model_dump(mode="json")


def extraction_body(record: Extraction, result: Result) -> Body:
    """Body of one person's reading of one outcome.

    Besides the numbers it holds what the reader says of the trial (``study``), of the document
    (``document``) and of the arms, because these are facts of a reading until two readings agree.
    """
    return {
        "trial": record.trial,
        "outcome": result.outcome,
        "report": record.report.id,
        "extractor": record.extractor,
        "values": result.numbers(),
        "locators": result.places(),
        "origins": dict(result.origins),
        "note": result.note,
        "not_usable": result.not_usable,
        "correction": record.correction,
        "third_reading": record.third_reading,
        "subgroup": dict(record.subgroups),
        "study": {
            "title": record.title,
            "registration": record.registration,
            "published": record.appeared(),
            "randomised": record.randomised,
            "design": record.design,
            "funding": record.funding,
            "interests": record.interests,
        },
        "document": {
            "form": record.report.form,
            "citation": record.report.citation,
            "identifier": record.report.identifier,
        },
        "arms": [_arm(arm) for arm in sorted(record.arms, key=lambda arm: arm.arm)],
    }


def adjudication_body(record: Adjudication) -> Body:
    """Body of a third person's decision."""
    return {
        "trial": record.trial,
        "outcome": record.outcome,
        "adjudicator": record.adjudicator,
        "values": record.values.numbers(),
        "not_reported": sorted(record.not_reported),
        "not_usable": record.not_usable,
        "study": record.study.model_dump(mode="json", exclude_none=True),
        "subgroup": dict(record.subgroups),
        "arms": [_arm(arm) for arm in sorted(record.arms, key=lambda arm: arm.arm)],
        "locators": record.places(),
        "reason_class": record.reason_class,
        "reason": record.reason,
        "unresolved": record.unresolved,
        "minutes": record.minutes,
    }


def waiver_body(record: Waiver) -> Body:
    """Body of a waiver."""
    return {
        "trial": record.trial,
        "outcome": record.outcome,
        "person": record.person,
        "reason": record.reason,
    }


def risk_of_bias_body(record: RiskOfBias, report: str | None) -> Body:
    """Body of a risk-of-bias judgement; ``report`` is the one the judged result was read from."""
    return {
        "trial": record.trial,
        "outcome": record.outcome,
        "report": record.report or report,
        "domains": record.domains.model_dump(mode="json"),
        "overall": record.overall.value,
        "support": dict(record.support),
        "assessors": sorted(record.assessors),
    }


def certainty_body(record: Certainty) -> Body:
    """Body of a certainty judgement."""
    return {
        "outcome": record.outcome,
        "rating": record.rating,
        "reasons": dict(record.reasons),
        "raters": sorted(record.raters),
        "version": record.version,
        "numbers": dict(record.numbers),
    }


def integrity_body(record: IntegrityNotice) -> Body:
    """Body of a published notice about a trial's report."""
    return {
        "trial": record.trial,
        "report": record.report,
        "notice": record.notice.value,
        "link": record.link,
        "reason": record.reason,
        "seen_by": record.seen_by,
    }


def search_body(record: SearchRun) -> Body:
    """Body of one search run."""
    return {
        "source": record.source,
        "date": record.date.isoformat(),
        "strategy": record.strategy,
        "strategy_sha256": record.strategy_sha256(),
        "hits": record.hits,
        "new_hits": record.new_hits,
        "error": record.error,
        "by": record.by,
    }


def screening_body(record: Screening) -> Body:
    """Body of one screening decision."""
    return {
        "report": record.report,
        "trial": record.trial,
        "decision": record.decision,
        "reason": record.reason,
        "citation": record.citation,
        "voters": sorted(record.voters),
    }


def ongoing_body(record: Ongoing) -> Body:
    """Body of a trial that is going on."""
    return {
        "trial": record.trial,
        "registration": record.registration,
        "planned": record.planned,
        "expected_end": record.expected_end.isoformat() if record.expected_end else None,
        "status": record.status,
        "outcomes": sorted(record.outcomes),
    }


def decision_body(record: PanelDecision) -> Body:
    """Body of a panel decision."""
    return {
        "recommendation": record.recommendation,
        "decision": record.decision,
        "reason": record.reason,
        "votes": dict(record.votes),
        "recusals": sorted(record.recusals),
        "date": record.date.isoformat(),
    }


def acknowledgement_body(record: Acknowledgement) -> Body:
    """Body of a panel member's word that a notice was seen."""
    return {"notice": record.notice, "person": record.person, "date": record.date.isoformat()}
