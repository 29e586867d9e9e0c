"""Checks of readings against the store and each other: is there a place for them, and for this trial."""

from __future__ import annotations

from collections.abc import Iterator

from treering.intake.bodies import extraction_body
from treering.intake.compare import compare_readings
from treering.intake.scene import Scene
from treering.intake.values import Fault, Located
from treering.records import Adjudication, Extraction, Result, last_day


def is_repeat(scene: Scene, record: Extraction, result: Result) -> bool:
    """Say whether the store holds this very reading as the live one."""
    live = scene.view.get(f"extraction/{record.trial}/{result.outcome}/{record.extractor}")
    return live is not None and dict(live.body) == extraction_body(record, result)


def reading_faults(
    scene: Scene, located: Located, record: Extraction, number: int, result: Result
) -> Iterator[Fault]:
    """Check that a reading has a place: first, second, third, or with a reason why it changes."""
    if is_repeat(scene, record, result):
        return
    if record.third_reading:
        yield from _third_reading(scene, located, record, result.outcome)
        return
    if record.correction:
        yield from _correction(scene, located, record, result.outcome)
    else:
        yield from _unexplained(scene, located, record, number, result.outcome)
    group = scene.open_readings.get((record.trial, result.outcome), {})
    readers = sorted(reader for report, reader in group if report == record.report.id)
    if len(readers) > 2:
        names = ", ".join(readers)
        sentence = f"trial {record.trial}, {result.outcome} has more than two readers ({names})."
        yield located.fault("extractor", sentence)


def _correction(scene: Scene, located: Located, record: Extraction, outcome: str) -> Iterator[Fault]:
    trial, who = record.trial, record.extractor
    if (trial, outcome) not in scene.known_cases:
        sentence = f"the store has no reading of trial {trial}, {outcome}: there is nothing to correct."
        yield located.fault("correction", sentence)
        return
    verified = scene.view.get(f"verification/{trial}/{outcome}") is not None
    if not verified and scene.view.get(f"extraction/{trial}/{outcome}/{who}") is None:
        sentence = f"{who} has not read trial {trial}, {outcome}: there is nothing of theirs to correct."
        yield located.fault("correction", sentence)


def _unexplained(
    scene: Scene, located: Located, record: Extraction, number: int, outcome: str
) -> Iterator[Fault]:
    """Refuse a reading that would change what is there without saying why."""
    trial, who = record.trial, record.extractor
    path = located.path(number, "outcome")
    live = scene.view.get(f"result/{trial}/{outcome}")
    own = scene.view.get(f"extraction/{trial}/{outcome}/{who}")
    if own is not None and own.body["report"] == record.report.id:
        known = "is verified" if live is not None else f"was read by {who}"
        sentence = f"trial {trial}, {outcome} {known} already: say why it changes with correction."
        yield located.fault(path, sentence)
    elif live is not None and live.body["report"] != record.report.id:
        yield from _older_source(scene, located, record, str(live.body["report"]))
    elif live is not None and not _is_waived(scene, record, outcome):
        sentence = (
            f"trial {trial}, {outcome} is verified already: say why it changes with correction, "
            "or mark a check of agreed numbers with third_reading = true."
        )
        yield located.fault(path, sentence)


def _older_source(scene: Scene, located: Located, record: Extraction, present: str) -> Iterator[Fault]:
    """Let no older report, and no preprint of an article, take the place of a result unasked."""
    report = scene.view.get(f"report/{present}")
    appeared = record.appeared()
    if report is None or appeared is None:
        return
    older = last_day(appeared).isoformat() < report.body["published"]
    if older or (record.report.form, report.body["form"]) == ("preprint", "article"):
        what = "appeared before" if older else "is a preprint, unlike"
        sentence = (
            f"report {record.report.id} {what} {present}, from which the result comes: "
            "say why it should take its place with correction."
        )
        yield located.fault("report", sentence)


def _is_waived(scene: Scene, record: Extraction, outcome: str) -> bool:
    verification = scene.view.get(f"verification/{record.trial}/{outcome}")
    return verification is not None and verification.body["basis"] == "waiver"


def _third_reading(scene: Scene, located: Located, record: Extraction, outcome: str) -> Iterator[Fault]:
    live = scene.view.get(f"result/{record.trial}/{outcome}")
    verification = scene.view.get(f"verification/{record.trial}/{outcome}")
    if live is None or verification is None:
        sentence = (
            f"trial {record.trial}, {outcome} is not verified yet: there is nothing to read a third time."
        )
        yield located.fault("third_reading", sentence)
        return
    if record.report.id != live.body["report"]:
        sentence = f"the verified result comes from report {live.body['report']}, not {record.report.id}."
        yield located.fault("report", sentence)
    involved = {*verification.body["extractors"], verification.body["adjudicator"]}
    if record.extractor in involved:
        sentence = f"{record.extractor} took part in this result; a third reading is another person's."
        yield located.fault("extractor", sentence)


def trial_faults(scene: Scene, located: Located, record: Extraction) -> Iterator[Fault]:
    """Check who the trial is: its id, its reports, its register number, the roles on it."""
    trial, who = record.trial, record.extractor
    if who in scene.adjudicators.get(trial, ()) and not record.third_reading:
        sentence = f"{who} adjudicates trial {trial}; nobody holds two of these roles on one trial."
        yield located.fault("extractor", sentence)
    others = sorted(scene.report_trials[record.report.id] - {trial})
    if others:
        sentence = f"report {record.report.id} is said to belong to trial {', '.join(others)} as well."
        yield located.fault("report", sentence)
    spelled = sorted(scene.spellings[trial.casefold()] - {trial})
    if spelled:
        sentence = f"{trial!r} differs from {', '.join(map(repr, spelled))} only in capitals; use one id."
        yield located.fault("trial", sentence)
    if record.registration:
        same = sorted(scene.registrations[record.registration.casefold()] - {trial})
        if same:
            sentence = (
                f"{record.registration} is also the register number of trial {', '.join(same)}; "
                "one trial counts once, however many reports or arms it has."
            )
            yield located.fault("registration", sentence)
    if record.appeared() is None and scene.view.get(f"report/{record.report.id}") is None:
        sentence = f"say when report {record.report.id} appeared: YYYY-MM-DD, YYYY-MM or YYYY."
        yield located.fault("published", sentence)


def adjudication_faults(scene: Scene, located: Located, record: Adjudication) -> Iterator[Fault]:
    """Check that an adjudication settles a difference between two other people's readings."""
    trial, who = record.trial, record.adjudicator
    if who in scene.readers.get(trial, ()):
        sentence = f"{who} has read trial {trial}; nobody holds two of these roles on one trial."
        yield located.fault("adjudicator", sentence)
    readings = scene.open_readings.get((trial, record.outcome), {})
    by_report: dict[str, list[str]] = {}
    for report, reader in sorted(readings):
        by_report.setdefault(report, []).append(reader)
    pairs = [(report, people) for report, people in by_report.items() if len(people) >= 2]
    if not pairs:
        done = scene.view.get(f"verification/{trial}/{record.outcome}") is not None and not readings
        why = "nothing waits there" if done else "two readings of one report must be in first"
        yield located.fault("outcome", f"trial {trial}, {record.outcome}: {why}.")
        return
    tolerance = scene.protocol.verification.relative_tolerance
    for report, (first, second, *_) in pairs:
        pair = readings[report, first], readings[report, second]
        if compare_readings(*pair, tolerance=tolerance).differences:
            return
    yield located.fault("outcome", f"trial {trial}, {record.outcome}: the two readings agree already.")
