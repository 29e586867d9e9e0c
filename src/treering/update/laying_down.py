"""A version in one transaction: its looks, its analyses, the version itself and the notices it calls for."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.notify import build_notices
from treering.records import NewEntry
from treering.store import EvidenceStore, Head
from treering.terms import Cause, EntryKind
from treering.update.context import RunContext
from treering.update.events import events_of
from treering.update.versions import Analyses, Basis


def lay_down(
    store: EvidenceStore, context: RunContext, basis: Basis, analyses: Analyses, changes: Mapping[str, Any]
) -> None:
    """Append one version: all of it or nothing.

    The version names the head of the tree over every entry before it, its own looks and analyses
    included; the notices follow it and print that head.

    Parameters
    ----------
    store : EvidenceStore
        The evidence store.
    context : RunContext
        The run.
    basis : Basis
        What the version is made from.
    analyses : mapping of str to dict
        Analysis bodies by synthesis id.
    changes : mapping of str to dict
        What `changes_of` gave.
    """

    def version_and_notices(head: Head) -> list[NewEntry]:
        events = events_of(basis, analyses, changes, head)
        return [_version(basis, context, head), *build_notices(events, context.review.panel, store.state())]

    store.append(
        [*_looks(basis, analyses), *_analyses(basis, analyses)],
        known_at=context.known_at,
        then=version_and_notices,
    )


def _looks(basis: Basis, analyses: Analyses) -> list[NewEntry]:
    entries = []
    for synthesis, body in analyses.items():
        monitoring = body["monitoring"]
        if monitoring and monitoring["new_look"]:
            look = monitoring["look"]
            entries.append(
                NewEntry(
                    EntryKind.LOOK,
                    f"look/{synthesis}/{look['number']}",
                    {"synthesis": synthesis, **look},
                    true_at=basis.date,
                )
            )
    return entries


def _analyses(basis: Basis, analyses: Analyses) -> list[NewEntry]:
    return [
        NewEntry(EntryKind.ANALYSIS, f"analysis/{synthesis}/{basis.version}", body, true_at=basis.date)
        for synthesis, body in analyses.items()
    ]


def _version(basis: Basis, context: RunContext, head: Head) -> NewEntry:
    causes = basis.causes
    body = {
        "version": basis.version,
        "date": basis.date,
        "previous": basis.version - 1 or None,
        "causes": list(causes),
        "protocol_digest": basis.protocol.digest(),
        "code_version": context.code_version,
        "entries": head.size,
        "root": head.root,
    }
    cause = Cause(causes[0]) if len(causes) == 1 else None
    return NewEntry(EntryKind.VERSION, f"version/{basis.version}", body, true_at=basis.date, cause=cause)
