"""A defect of the program itself: which versions it touched, what they come to now, and who is told."""

from __future__ import annotations

import re
from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from treering.errors import StoreError
from treering.notify import Event, build_notices
from treering.records import NewEntry
from treering.store import EvidenceStore
from treering.terms import Cause, EntryKind, EventClass
from treering.update.context import RunContext
from treering.update.replaying import differing
from treering.update.versions import analyse_synthesis, analyses_of
from treering.update.views import basis_of
from treering.update.weekly import evidence, one_writer, step_notify


@dataclass(frozen=True)
class DefectNotice:
    """What came of declaring a defect.

    Parameters
    ----------
    id : str
        The defect.
    versions : tuple of int
        The versions that it touched.
    outcomes : tuple of str
        The outcomes of which people are told.
    again : mapping of str to str
        What computing the touched versions again gives, a sentence for each outcome.
    undelivered : tuple of str
        Notices that could not be delivered; the next update tries again.
    """

    id: str
    versions: tuple[int, ...]
    outcomes: tuple[str, ...]
    again: Mapping[str, str]
    undelivered: tuple[str, ...] = ()


def declare_defect(
    context: RunContext,
    *,
    defect: str,
    description: str,
    code_versions: Collection[str],
    by: str,
    outcomes: Collection[str] | None = None,
) -> DefectNotice:
    """Record a defect of the program, compute what it touched again, and tell the panel.

    Nothing that was published changes. The next update lays down a version with the present program, whose
    movements are then called a software change.

    Parameters
    ----------
    context : RunContext
        The review, the time and the present code version.
    defect : str
        Short id: letters, digits, dots, dashes.
    description : str
        What was wrong, in a sentence.
    code_versions : collection of str
        Code versions that had the defect; each version of the evidence names its own.
    by : str
        Id of the person who declares it.
    outcomes : collection of str, optional
        Outcomes that it touched; all by default.

    Returns
    -------
    DefectNotice

    Raises
    ------
    StoreError
        When the id cannot be used or is taken, or no version was made with such code.
    """
    with one_writer(context):
        with evidence(context) as store:
            found = _touched(store, defect, code_versions, outcomes)
            entry = NewEntry(
                EntryKind.DEFECT,
                f"defect/{defect}",
                {"id": defect, "description": description, "versions": list(found.versions)},
                true_at=context.day,
                by=by,
                cause=Cause.SOFTWARE,
                reason=description,
            )
            events = list(_events(store, found, description))
            notices = build_notices(events, context.review.panel, store.state())
            store.append([entry, *notices], known_at=context.known_at)
        failures = step_notify(context)
    return DefectNotice(found.id, found.versions, found.outcomes, found.again, failures)


def _touched(
    store: EvidenceStore, defect: str, codes: Collection[str], outcomes: Collection[str] | None
) -> DefectNotice:
    """Find the versions and outcomes that a defect touched, and compute them again."""
    if not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9.-]*", defect) or store.state().get(f"defect/{defect}"):
        raise StoreError(
            "a defect needs a new short id.",
            found=defect,
            expected="letters, digits, dots or dashes, not used before",
        )
    versions = [body for body in store.versions() if body["code_version"] in codes]
    if not versions:
        known = sorted({str(body["code_version"]) for body in store.versions()})
        raise StoreError(
            "no version of the evidence was made with such code.",
            found=", ".join(sorted(codes)),
            expected=" or ".join(known) or "none yet",
            next_step="`treering history` shows the code version of each version.",
        )
    numbers = tuple(int(body["version"]) for body in versions)
    again: dict[str, list[str]] = {}
    for number in numbers:
        for synthesis, part in _again(store, number, outcomes):
            again.setdefault(synthesis, []).append(part)
    told = {
        name: f"Computed again with the present program: {'; '.join(parts)}." for name, parts in again.items()
    }
    return DefectNotice(defect, numbers, tuple(told), told)


def _again(store: EvidenceStore, version: int, outcomes: Collection[str] | None) -> Iterator[tuple[str, str]]:
    """Say for each outcome of a version how many of its stored figures come out otherwise now."""
    basis = basis_of(store, version)
    stored = analyses_of(store.state(version=version), version)
    for outcome in basis.protocol.outcomes:
        if outcome.id not in stored or (outcomes is not None and outcome.id not in outcomes):
            continue
        count = sum(1 for _ in differing(stored[outcome.id], analyse_synthesis(basis, outcome.id)))
        figures = "1 figure differs" if count == 1 else f"{count or 'no'} figures differ"
        yield outcome.id, f"in version {version} {figures}"


def _events(store: EvidenceStore, found: DefectNotice, description: str) -> Iterator[Event]:
    latest: dict[str, Any] = store.versions()[-1]
    analyses = analyses_of(store.state(), int(latest["version"]))
    for synthesis in found.outcomes:
        yield Event(
            event=EventClass.DEFECT,
            synthesis=synthesis,
            version=int(latest["version"]),
            date=str(latest["date"]),
            body=analyses.get(synthesis, {"title": synthesis}),
            head_size=int(latest["entries"]),
            head_root=str(latest["root"]),
            defect={
                "id": found.id,
                "description": description,
                "versions": found.versions,
                "again": found.again[synthesis],
            },
        )
