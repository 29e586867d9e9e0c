"""Checks that need the store and the other dropped records: who reads what, and what hangs on what."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator

from treering.intake.bodies import extraction_body
from treering.intake.compare import compare_readings
from treering.intake.scene import Scene
from treering.intake.values import Fault, Located, Remark
from treering.records import (
    Acknowledgement,
    Adjudication,
    Certainty,
    Extraction,
    IntegrityNotice,
    Result,
    RiskOfBias,
    SearchRun,
    Waiver,
    Withdrawal,
)
from treering.terms import EntryKind, NoticeKind

_WITHDRAWABLE = frozenset(
    {
        EntryKind.RESULT,
        EntryKind.RISK_OF_BIAS,
        EntryKind.CERTAINTY,
        EntryKind.INTEGRITY,
        EntryKind.SCREENING,
        EntryKind.SEARCH,
        EntryKind.ONGOING,
        EntryKind.WAIVER,
    }
)


def faults_together(scene: Scene) -> Iterator[Fault]:
    """Yield what is wrong with records in the light of the store and of each other."""
    yield from _repeats(scene)
    for located, record, number, result in scene.readings():
        yield from _reading(scene, located, record, number, result)
    for located, extraction in scene.of(Extraction):
        yield from _trial(scene, located, extraction)
    for located, adjudication in scene.of(Adjudication):
        yield from _adjudication(scene, located, adjudication)
    for located, waiver in scene.of(Waiver):
        yield from _waiver(scene, located, waiver)
    for located, judgement in scene.of(RiskOfBias):
        yield from _risk_of_bias(scene, located, judgement)
    yield from _others(scene)


def remarks_together(scene: Scene) -> Iterator[Remark]:
    """Yield what a reviewer should look at across records."""
    for located, record, number, result in scene.readings():
        if _is_repeat(scene, record, result):
            path = located.path(number, "outcome")
            yield located.remark(path, "this reading is in the store already; nothing changes.")
    readers: dict[tuple[str, str], set[str]] = {}
    for located, extraction in scene.of(Extraction):
        readers.setdefault((located.place.file, extraction.trial), set()).add(extraction.extractor)
    files = sorted({file for (file, _), people in readers.items() if len(people) > 1})
    for file in files:
        yield Remark(file, "", "it holds both readings of a trial; two people should extract apart.")
    for located, run in scene.of(SearchRun):
        yield from _search_remarks(scene, located, run)


def _signature(located: Located) -> tuple[str, ...] | None:
    """Name the place in the store that a record would take; two records can't take one."""
    record = located.record
    name = record.record
    if isinstance(record, Adjudication | Waiver | RiskOfBias):
        return (name, record.trial, record.outcome)
    if isinstance(record, Certainty):
        return (name, record.outcome)
    if isinstance(record, Withdrawal):
        return (name, record.key)
    if isinstance(record, Acknowledgement):
        return (name, record.notice)
    if isinstance(record, IntegrityNotice):
        return (name, record.trial, record.notice.value, record.date.isoformat())
    if isinstance(record, SearchRun):
        return (name, record.source, record.date.isoformat())
    return None


def _repeats(scene: Scene) -> Iterator[Fault]:
    """Refuse two records of one drop that would take one place, whichever came first."""
    readings = [
        (located, ("extraction", r.trial, result.outcome, r.extractor))
        for located, r, _, result in scene.readings()
    ]
    others = [(located, sign) for located in scene.records if (sign := _signature(located))]
    counts = Counter(sign for _, sign in [*readings, *others])
    for located, sign in readings:
        if counts[sign] > 1:
            sentence = (
                f"{sign[3]} stands as extractor of trial {sign[1]}, outcome {sign[2]}, more than once; "
                "the second reading must come from another person."
            )
            yield located.fault("extractor", sentence)
    for located, sign in others:
        if counts[sign] > 1:
            yield located.fault("", f"this {sign[0]} was dropped more than once: {', '.join(sign[1:])}.")


def _is_repeat(scene: Scene, record: Extraction, result: Result) -> bool:
    live = scene.view.get(f"extraction/{record.trial}/{result.outcome}/{record.extractor}")
    return live is not None and dict(live.body) == extraction_body(record, result)


def _reading(
    scene: Scene, located: Located, record: Extraction, number: int, result: Result
) -> Iterator[Fault]:
    """Check that a reading has a place: first, second, third, or with a reason why it changes."""
    if _is_repeat(scene, record, result):
        return
    trial, outcome, who = record.trial, result.outcome, record.extractor
    path = located.path(number, "outcome")
    live = scene.view.get(f"result/{trial}/{outcome}")
    own = scene.view.get(f"extraction/{trial}/{outcome}/{who}")
    if record.third_reading:
        yield from _third_reading(scene, located, record, outcome)
        return
    if record.correction:
        if (trial, outcome) not in scene.known_cases:
            sentence = f"the store has no reading of trial {trial}, {outcome}: there is nothing to correct."
            yield located.fault("correction", sentence)
        return
    if own is not None and own.body["report"] == record.report.id:
        known = "is verified" if live is not None else f"was read by {who}"
        sentence = f"trial {trial}, {outcome} {known} already: say why it changes with correction."
        yield located.fault(path, sentence)
    elif (
        live is not None
        and live.body["report"] == record.report.id
        and not _is_waived(scene, record, outcome)
    ):
        sentence = (
            f"trial {trial}, {outcome} is verified already: say why it changes with correction, "
            "or mark a check of agreed numbers with third_reading = true."
        )
        yield located.fault(path, sentence)
    group = scene.open_readings.get((trial, outcome), {})
    readers = sorted(reader for report, reader in group if report == record.report.id)
    if len(readers) > 2 and (own is None or own.body["report"] != record.report.id):
        sentence = f"trial {trial}, {outcome} has more than two readers ({', '.join(readers)})."
        yield located.fault("extractor", sentence)


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


def _trial(scene: Scene, located: Located, record: Extraction) -> Iterator[Fault]:
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
                "one trial counts once, however many reports it has."
            )
            yield located.fault("registration", sentence)
    if record.appeared() is None and scene.view.get(f"report/{record.report.id}") is None:
        sentence = f"say when report {record.report.id} appeared: YYYY-MM-DD, YYYY-MM or YYYY."
        yield located.fault("published", sentence)


def _adjudication(scene: Scene, located: Located, record: Adjudication) -> Iterator[Fault]:
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


def _waiver(scene: Scene, located: Located, record: Waiver) -> Iterator[Fault]:
    if record.person in scene.readers.get(record.trial, ()):
        sentence = f"{record.person} has read trial {record.trial} and can't waive the second reading."
        yield located.fault("person", sentence)
    if (record.trial, record.outcome) not in scene.known_results:
        yield located.fault("trial", f"there is no reading of trial {record.trial}, {record.outcome}.")


def _risk_of_bias(scene: Scene, located: Located, record: RiskOfBias) -> Iterator[Fault]:
    if (record.trial, record.outcome) not in scene.known_results:
        yield located.fault("trial", f"there is no reading of trial {record.trial}, {record.outcome}.")
    if record.report and record.trial not in scene.report_trials.get(record.report, ()):
        yield located.fault("report", f"trial {record.trial} has no report {record.report}.")


def _others(scene: Scene) -> Iterator[Fault]:
    for located, rating in scene.of(Certainty):
        if scene.view.get(f"version/{rating.version}") is None:
            yield located.fault("version", f"there is no version {rating.version} to rate.")
    for located, notice in scene.of(IntegrityNotice):
        yield from _notice(scene, located, notice)
    for located, seen in scene.of(Acknowledgement):
        live = scene.view.get(seen.notice)
        if live is None or live.kind is not EntryKind.NOTICE:
            yield located.fault("notice", f"there is no notice {seen.notice!r}.")
        elif live.body["person"] != seen.person:
            yield located.fault("person", f"the notice went to {live.body['person']}, not to {seen.person}.")
    for located, taken in scene.of(Withdrawal):
        live = scene.view.get(taken.key)
        if live is None:
            yield located.fault("key", f"no live entry has the key {taken.key!r}.")
        elif live.kind not in _WITHDRAWABLE:
            yield located.fault("key", f"{_article(live.kind.value)} {live.kind.value} can't be withdrawn.")


def _article(word: str) -> str:
    return "an" if word[0] in "aeio" else "a"


def _notice(scene: Scene, located: Located, record: IntegrityNotice) -> Iterator[Fault]:
    if record.trial not in scene.trials:
        yield located.fault("trial", f"the review has no trial {record.trial}.")
        return
    if record.report and record.trial not in scene.report_trials.get(record.report, ()):
        yield located.fault("report", f"trial {record.trial} has no report {record.report}.")
    if record.notice is NoticeKind.REINSTATEMENT:
        earlier = [
            entry
            for entry in scene.view.live(EntryKind.INTEGRITY)
            if entry.body["trial"] == record.trial and entry.body["notice"] == NoticeKind.RETRACTION.value
        ]
        if not earlier:
            yield located.fault("notice", f"trial {record.trial} was never retracted here.")


def _search_remarks(scene: Scene, located: Located, record: SearchRun) -> Iterator[Remark]:
    earlier = [e for e in scene.view.live(EntryKind.SEARCH) if e.body["source"] == record.source]
    if not earlier:
        return
    last = max(earlier, key=lambda entry: (entry.true_at, entry.seq))
    if record.hits == 0 and any(entry.body["hits"] for entry in earlier):
        sentence = f"{record.source} gave hits before and none now; did the search run?"
        yield located.remark("hits", sentence)
    if last.body["strategy_sha256"] != record.strategy_sha256():
        yield located.remark("strategy", f"the strategy differs from that of {last.true_at}.")
