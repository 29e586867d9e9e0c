"""Checks of judgements, notices and decisions: does what they speak of exist."""

from __future__ import annotations

from collections.abc import Iterator

from treering.intake.scene import Scene
from treering.intake.values import Fault, Located
from treering.records import Acknowledgement, Certainty, IntegrityNotice, RiskOfBias, Waiver, Withdrawal
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


def link_faults(scene: Scene) -> Iterator[Fault]:
    """Yield what is wrong with records that speak of something in the store or the drop."""
    for located, waiver in scene.of(Waiver):
        yield from _waiver(scene, located, waiver)
    for located, judgement in scene.of(RiskOfBias):
        yield from _risk_of_bias(scene, located, judgement)
    yield from _others(scene)


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
