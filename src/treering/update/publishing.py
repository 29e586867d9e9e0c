"""Reports from the store: each version's folder, laid down once, and the index over all of them."""

from __future__ import annotations

import shutil
from pathlib import Path
from typing import Any

from treering.errors import ReportError
from treering.records import NewEntry
from treering.report import ReportView, render, render_index
from treering.report.wording import status_words
from treering.store import EvidenceStore, State
from treering.terms import EntryKind
from treering.update.context import Review, RunContext
from treering.update.rhythm import rhythm, rhythm_words
from treering.update.views import folder_name, index_rows, still_ongoing, version_view


def unpublished(store: EvidenceStore) -> list[dict[str, Any]]:
    """Return the versions that were laid down but whose release is not recorded, in order."""
    released = {int(entry.body["version"]) for entry in store.state().live(EntryKind.RELEASE)}
    return [body for body in store.versions() if int(body["version"]) not in released]


def publish_version(store: EvidenceStore, context: RunContext, version: dict[str, Any]) -> Path:
    """Render one version from the store, move it into place whole, and record its files' digests.

    Parameters
    ----------
    store : EvidenceStore
        The evidence store.
    context : RunContext
        The run.
    version : dict
        Body of the version entry.

    Returns
    -------
    Path
        The report folder.

    Raises
    ------
    ReportError
        When a folder of that name holds other bytes: a released version is never rewritten.
    """
    target = context.review.reports / folder_name(version)
    digests = _into_place(version_view(store, int(version["version"])), target)
    store.append(
        [
            NewEntry(
                EntryKind.RELEASE,
                f"release/{version['version']}",
                {"version": version["version"], "files": digests},
                true_at=context.day,
            )
        ],
        known_at=context.known_at,
    )
    return target


def _into_place(view: ReportView, target: Path) -> dict[str, str]:
    """Render beside `target`, then rename: a half-written report is never seen under its name."""
    draft = target.with_name(f".{target.name}.draft")
    if draft.exists():
        shutil.rmtree(draft)
    draft.mkdir(parents=True)
    digests = render(view, draft)
    if target.exists():
        _must_equal(draft, target)
        shutil.rmtree(draft)
    else:
        draft.rename(target)
    return digests


def _must_equal(draft: Path, target: Path) -> None:
    """Accept a finished folder that a run left when it died after the rename; refuse any other."""
    for path in sorted(p for p in draft.rglob("*") if p.is_file()):
        other = target / path.relative_to(draft)
        if not other.is_file() or other.read_bytes() != path.read_bytes():
            raise ReportError(
                "a report folder of this name is there already and holds something else.",
                file=str(other),
                next_step="Move that folder away and run `treering update` again; the store has the version.",
            )


def publish_index(store: EvidenceStore, review: Review, *, status: dict[str, Any]) -> Path:
    """Write reports/index.html over all versions, with the status line.

    Parameters
    ----------
    store : EvidenceStore
        The evidence store.
    review : Review
        The review folder.
    status : dict
        What `status_of` gives.

    Returns
    -------
    Path
        The index page.
    """
    path = review.reports / "index.html"
    page = render_index(review.protocol, index_rows(store), status)
    review.reports.mkdir(parents=True, exist_ok=True)
    draft = path.with_name(f".{path.name}.draft")
    draft.write_bytes(page)
    draft.replace(path)
    return path


def status_of(state: State, context_day: str, review: Review, waiting: int) -> dict[str, Any]:
    """Say how the living review stands: last run, searches, what waits, what is due.

    Parameters
    ----------
    state : State
        Everything in the store.
    context_day : str
        ISO date of the run.
    review : Review
        The review.
    waiting : int
        Results that are not verified yet.

    Returns
    -------
    dict
        Plain values for the status line, and the line itself as ``text``.
    """
    searches: dict[str, str] = {}
    for entry in state.live(EntryKind.SEARCH):
        if not entry.body.get("error"):
            source = entry.body["source"]
            searches[source] = max(searches.get(source, ""), entry.body["date"])
    status: dict[str, Any] = {
        "date": context_day,
        "searches": dict(sorted(searches.items())),
        "planned_sources": dict(sorted(review.protocol.living.search_every_days.items())),
        "waiting": waiting,
        "ongoing": len(still_ongoing(state)),
        "update_every_days": review.protocol.living.update_every_days,
        "rhythm": rhythm(state, context_day, review.protocol.living.update_every_days),
    }
    return {**status, "text": "; ".join([status_words(status), *rhythm_words(status["rhythm"])])}
