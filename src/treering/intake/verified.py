"""The entries of one verified result: study, arms, report, verification, result. Pure."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from treering.intake.pair import Final
from treering.intake.view import StateView, StoredView
from treering.records import NewEntry, last_day
from treering.terms import Cause, EntryKind

# Facts of the trial that a later report may restate; the others keep what the first report said.
_RESTATED = frozenset({"registration", "randomised", "design"})
_STUDY = ("title", "registration", "randomised", "design", "year", "funding", "interests")


def final_entries(final: Final, view: StateView, made: Mapping[str, NewEntry]) -> Iterator[NewEntry]:
    """Yield the entries that a verified reading lays down.

    Parameters
    ----------
    final : Final
        The verified reading and what it rests on.
    view : StateView
        The state of the store.
    made : mapping of str to NewEntry
        Entries already made in this run, by key: a trial with two outcomes is one study.

    Yields
    ------
    NewEntry
        Only those that say something new.
    """
    cause, reason = _cause(final, view)
    published = _published(final, view, made)
    parts = (
        _study(final, view, made, published),
        *_arms(final),
        _report(final, view, made, published),
        (EntryKind.VERIFICATION, _key("verification", final), _verification(final)),
        (EntryKind.RESULT, _key("result", final), _result(final)),
    )
    known = max(entry.known_at for entry in final.inputs)[:10]
    for kind, key, body in parts:
        live = view.get(key)
        earlier = made[key].body if key in made else live.body if live else None
        if earlier == body:
            continue
        yield NewEntry(
            kind=kind,
            key=key,
            body=body,
            true_at=known if kind is EntryKind.VERIFICATION else published or known,
            cause=cause,
            reason=reason,
            replaces=live.seq if live else None,
        )


def _key(kind: str, final: Final) -> str:
    return f"{kind}/{final.case.trial}/{final.case.outcome}"


def _cause(final: Final, view: StateView) -> tuple[Cause, str | None]:
    """Say why a number may differ: a new trial, a correction, or a new report of an included trial."""
    live = view.get(_key("result", final))
    if live is None:
        return Cause.NEW_TRIAL, None
    correction = final.reading["correction"]
    if correction or live.body["report"] == final.reading["report"]:
        return Cause.CORRECTION, correction or "a second reading replaces a waiver"
    return Cause.NEW_REPORT, f"report {final.reading['report']} follows {live.body['report']}"


def _published(final: Final, view: StateView, made: Mapping[str, NewEntry]) -> str | None:
    """Return the day the report appeared: what the readers wrote, else what the store knows."""
    written = final.reading["study"].get("published")
    if written:
        known = max(entry.known_at for entry in final.readings)[:10]
        return min(last_day(written).isoformat(), known)
    key = f"report/{final.reading['report']}"
    body = made[key].body if key in made else getattr(view.get(key), "body", None)
    return None if body is None else body["published"]


Part = tuple[EntryKind, str, dict[str, Any]]


def _study(final: Final, view: StateView, made: Mapping[str, NewEntry], published: str | None) -> Part:
    key = f"study/{final.case.trial}"
    live: StoredView | None = view.get(key)
    body: dict[str, Any] = dict(made[key].body if key in made else live.body if live else {})
    body.setdefault("trial", final.case.trial)
    given = {**final.reading["study"], "year": int(published[:4]) if published else None}
    corrected = bool(final.reading["correction"])
    for name in _STUDY:
        old, new = body.get(name), given.get(name)
        restate = new is not None and (old is None or name in _RESTATED or (corrected and name != "year"))
        body[name] = new if restate else old
    return EntryKind.STUDY, key, body


def _arms(final: Final) -> list[Part]:
    trial = final.case.trial
    return [
        (EntryKind.ARM, f"arm/{trial}/{arm['arm']}", {"trial": trial, **arm}) for arm in final.reading["arms"]
    ]


def _report(final: Final, view: StateView, made: Mapping[str, NewEntry], published: str | None) -> Part:
    report = final.reading["report"]
    key = f"report/{report}"
    live = view.get(key)
    body: dict[str, Any] = dict(made[key].body if key in made else live.body if live else {})
    document = final.reading["document"]
    body.update(report=report, trial=final.case.trial, published=published)
    for name in ("form", "citation", "identifier"):
        body[name] = document.get(name) if document.get(name) is not None else body.get(name)
    return EntryKind.REPORT, key, body


def _verification(final: Final) -> dict[str, Any]:
    comparison = final.comparison
    adjudication, waiver = final.adjudication, final.waiver
    return {
        "trial": final.case.trial,
        "outcome": final.case.outcome,
        "basis": final.basis,
        "extractors": [entry.body["extractor"] for entry in final.readings],
        "adjudicator": adjudication.body["adjudicator"] if adjudication else None,
        "extractions": [entry.seq for entry in final.readings],
        "adjudication": adjudication.seq if adjudication else None,
        "waiver": waiver.seq if waiver else None,
        "fields": len(comparison.agreed) + len(comparison.differences),
        "agreed": list(comparison.agreed),
        "differences": [d.to_dict() for d in (*comparison.differences, *comparison.tolerated)],
        "reread": False,
    }


def _result(final: Final) -> dict[str, Any]:
    reading = final.reading
    return {
        "trial": final.case.trial,
        "outcome": final.case.outcome,
        "report": reading["report"],
        "values": dict(reading["values"]),
        "locators": dict(reading["locators"]),
        "origins": dict(reading["origins"]),
        "not_usable": reading["not_usable"],
        "verification": _key("verification", final),
        "subgroup": dict(reading["subgroup"]),
    }
