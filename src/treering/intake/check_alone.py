"""Checks that need one record and the protocol: people, outcomes, dates, numbers."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from treering.intake.numbers import (
    Finding,
    effect_faults,
    impossible_numbers,
    number_faults,
)
from treering.intake.oddities import number_remarks
from treering.intake.scene import Scene
from treering.intake.sentences import closest
from treering.intake.values import Fault, Located, Remark
from treering.protocol import Outcome, Protocol
from treering.records import (
    Adjudication,
    Certainty,
    Extraction,
    IntegrityNotice,
    Ongoing,
    Result,
    RiskOfBias,
    SearchRun,
    Waiver,
    Withdrawal,
)
from treering.terms import PersonRole

_ROLES: dict[type, tuple[str, tuple[PersonRole, ...]]] = {
    Extraction: ("extractor", (PersonRole.EXTRACTOR,)),
    Adjudication: ("adjudicator", (PersonRole.ADJUDICATOR,)),
    Waiver: ("person", (PersonRole.REVIEW_LEAD,)),
    RiskOfBias: ("assessors", (PersonRole.ROB_ASSESSOR,)),
    Certainty: ("raters", (PersonRole.CERTAINTY_RATER,)),
    IntegrityNotice: ("seen_by", (PersonRole.INTEGRITY_CONTACT,)),
    SearchRun: ("by", (PersonRole.INFORMATION_SPECIALIST,)),
    Withdrawal: ("by", (PersonRole.REVIEW_LEAD,)),
}
_THIRD_READERS = (PersonRole.EXTRACTOR, PersonRole.ADJUDICATOR)


def faults_alone(located: Located, scene: Scene) -> Iterator[Fault]:
    """Yield what is wrong with one record whatever else was dropped."""
    yield from _people(located, scene.protocol)
    yield from _dates(located, scene.known_date)
    record = located.record
    if isinstance(record, Extraction):
        for number, result in enumerate(record.results):
            yield from _result(located, record, number, result, scene.protocol)
        yield from _arms(located, record)
        return
    outcomes = record.outcomes if isinstance(record, Ongoing) else (getattr(record, "outcome", None),)
    for outcome in outcomes:
        if outcome is not None and scene.protocol.outcome(outcome) is None:
            yield located.fault("outcome", _unknown_outcome(outcome, scene.protocol))
    if isinstance(record, Adjudication):
        yield from _adjudicated_numbers(located, record, scene.protocol)


def faults_of_effects(scene: Scene) -> list[Fault]:
    """Find the readings of the drop that the analysis could compute no effect from."""
    usable = [
        (located, number, result.numbers(), outcome.measure)
        for located, record, number, result in scene.readings()
        if result.not_usable is None
        and not record.third_reading
        and (outcome := scene.protocol.outcome(result.outcome)) is not None
    ]
    found = effect_faults([(numbers, measure) for _, _, numbers, measure in usable])
    return [
        located.fault(located.path(number, finding.field), finding.sentence)
        for (located, number, _, _), finding in zip(usable, found, strict=True)
        if finding is not None
    ]


def remarks_alone(located: Located, scene: Scene) -> Iterator[Remark]:
    """Yield what a reviewer should look at in one sound record."""
    record = located.record
    if isinstance(record, Extraction):
        for number, result in enumerate(record.results):
            outcome = scene.protocol.outcome(result.outcome)
            if outcome is None or result.not_usable is not None:
                continue
            usual = scene.usual_sds(result.outcome, but=record.trial)
            for finding in number_remarks(result.numbers(), outcome, usual_sds=usual):
                yield located.remark(located.path(number, finding.field), finding.sentence)
            unplaced = sorted(set(result.numbers()) - set(result.places()))
            if unplaced:
                sentence = f"no place in the report is given for {', '.join(unplaced)}."
                yield located.remark(located.path(number, "locator"), sentence)
    if isinstance(record, Adjudication) and record.reason_class == "rule gap":
        yield located.remark("reason_class", "a rule gap: the protocol needs a clause for such cases.")
    if isinstance(record, RiskOfBias):
        missing = sorted(set(type(record.domains).model_fields) - set(record.support))
        if missing:
            yield located.remark("support", f"no reason is given for {', '.join(missing)}.")


def _people(located: Located, protocol: Protocol) -> Iterator[Fault]:
    record = located.record
    field, roles = _ROLES.get(type(record), ("", ()))
    if isinstance(record, Extraction) and record.third_reading:
        roles = _THIRD_READERS
    field = field or {"Screening": "voters", "PanelDecision": "recorded_by"}.get(type(record).__name__, "by")
    trial = getattr(record, "trial", None)
    for name in record.people():
        person = protocol.person(name)
        if person is None:
            known = [p.id for p in protocol.people]
            yield located.fault(field, f"{name!r} is not in the review's people{closest(name, known) or '.'}")
            continue
        if roles and not set(roles) & set(person.roles):
            wanted = " or ".join(role.value for role in roles)
            has = ", ".join(role.value for role in person.roles)
            yield located.fault(field, f"{name} is not {_article(wanted)} {wanted} (roles: {has}).")
        if trial is not None and trial in person.own_trials:
            yield located.fault(field, f"{name} took part in trial {trial} and can't handle it here.")


def _article(word: str) -> str:
    return "an" if word[0] in "aeio" else "a"


def _dates(located: Located, known_date: str | None) -> Iterator[Fault]:
    """Refuse a day after the run: nothing that lies ahead can be known."""
    if known_date is None:
        return
    record = located.record
    given: dict[str, date | None] = {"date": getattr(record, "date", None)}
    if isinstance(record, Extraction) and record.appeared():
        written = str(record.appeared())
        given["published"] = date.fromisoformat(f"{written}-01-01"[:10])
    for field, day in given.items():
        if day is not None and day.isoformat() > known_date:
            yield located.fault(field, f"{day.isoformat()} lies after this update's date, {known_date}.")


def _unknown_outcome(outcome: str, protocol: Protocol) -> str:
    known = [o.id for o in protocol.outcomes]
    guess = closest(outcome, known)
    return f"the protocol has no outcome {outcome!r}" + (guess or f" (it has: {', '.join(known)}).")


def _result(
    located: Located, record: Extraction, number: int, result: Result, protocol: Protocol
) -> Iterator[Fault]:
    outcome = protocol.outcome(result.outcome)
    if outcome is None:
        path = located.path(number, "outcome")
        yield located.fault(path, _unknown_outcome(result.outcome, protocol))
        return
    for name in record.subgroups:
        if not any(name in o.subgroups for o in protocol.outcomes):
            column = f"subgroup:{name}" if located.place.row is not None else f"subgroups.{name}"
            yield located.fault(column, f"{name!r} is not a planned subgroup of the protocol.")
    for finding in _number_faults(record, result, outcome):
        yield located.fault(located.path(number, finding.field), finding.sentence)


def _number_faults(record: Extraction, result: Result, outcome: Outcome) -> list[Finding]:
    """Hold a usable result to all it needs; a third reading or an unusable one only to what can't be."""
    if record.third_reading or result.not_usable is not None:
        if record.third_reading and not result.numbers():
            return [Finding("outcome", "a third reading needs at least one number.")]
        return impossible_numbers(result.numbers(), is_ratio=outcome.is_ratio)
    arms = [(arm.side, arm.randomised) for arm in record.arms]
    return number_faults(result.numbers(), outcome, randomised=record.randomised, arms=arms)


def _arms(located: Located, record: Extraction) -> Iterator[Fault]:
    if not record.arms:
        return
    for side in ("intervention", "comparator"):
        if not any(arm.side == side for arm in record.arms):
            yield located.fault("arms", f"no arm stands on the {side} side.")
    sizes = [arm.randomised for arm in record.arms]
    known = [size for size in sizes if size is not None]
    if record.randomised is not None and len(known) == len(sizes) and sum(known) != record.randomised:
        sentence = f"the arms add to {sum(known)}, but {record.randomised} were randomised."
        yield located.fault("arms", sentence)


def _adjudicated_numbers(located: Located, record: Adjudication, protocol: Protocol) -> Iterator[Fault]:
    outcome = protocol.outcome(record.outcome)
    if outcome is None:
        return
    for finding in impossible_numbers(record.values.numbers(), is_ratio=outcome.is_ratio):
        yield located.fault(f"values.{finding.field}", finding.sentence)
