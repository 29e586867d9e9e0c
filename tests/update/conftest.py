"""One week without drawing: the steps of an update up to the version in the store, figures left out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

import pytest

from treering.terms import EntryKind


@dataclass(frozen=True)
class Week:
    """What one week left: the analyses of its version (none in a quiet week), what waits, what went back."""

    version: int | None
    syntheses: dict[str, Any]
    changes: dict[str, Any]
    waiting: tuple[dict[str, Any], ...]
    returned: list[dict[str, Any]]
    told: list[dict[str, Any]]

    @property
    def failed(self) -> dict[str, Any]:
        """The analysis of the outcome that the small review always has."""
        found: dict[str, Any] = self.syntheses["failed"]
        return found

    @property
    def verdict(self) -> str:
        return str(self.failed["monitoring"]["look"]["verdict"])

    def trial(self, name: str, outcome: str = "failed") -> dict[str, Any]:
        (row,) = [row for row in self.syntheses[outcome]["trials"] if row["trial"] == name]
        found: dict[str, Any] = row
        return found

    def variant(self, name: str) -> dict[str, Any]:
        (row,) = [row for row in self.failed["sensitivity"] if row["name"] == name]
        found: dict[str, Any] = row
        return found


def _week(review: Any, day: str, code: str = "test") -> Week:
    from treering.update import RunContext, read_review
    from treering.update.versions import analyse_synthesis, changes_of
    from treering.update.weekly import step_append, step_basis, step_lay_down, step_read, step_verify

    moment = datetime.fromisoformat(f"{day}T12:00:00").replace(tzinfo=UTC)
    context = RunContext(read_review(review.folder), moment, code)
    taken = step_verify(context, step_read(context))
    step_append(context, taken)
    basis = step_basis(context)
    if basis is None:
        return Week(None, {}, {}, taken.waiting, taken.returned, [])
    syntheses = {o.id: analyse_synthesis(basis, o.id) for o in basis.protocol.outcomes}
    changes = changes_of(basis, syntheses)
    step_lay_down(context, basis, syntheses, changes)
    with review.store() as store:
        notices = [e.body for e in store.state().all(EntryKind.NOTICE) if e.known_at == context.known_at]
    return Week(basis.version, syntheses, changes, taken.waiting, taken.returned, notices)


@pytest.fixture
def week() -> Callable[..., Week]:
    """Live one week of a review."""
    return _week


@pytest.fixture
def base(review: Any, week: Callable[..., Week]) -> Any:
    """Return the small review with three small trials in its first version."""
    for trial, counts in (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138)), ("T3", (15, 80, 21, 82))):
        review.drop_pair(trial, counts)
    week(review, "2026-01-05")
    return review


@pytest.fixture
def crossed(base: Any, week: Callable[..., Week]) -> Any:
    """Return the small review after a large trial made it cross in its second version."""
    base.drop_pair("Large", (150, 800, 230, 800))
    assert week(base, "2026-01-12").verdict == "benefit boundary crossed"
    return base


@pytest.fixture
def notice() -> Callable[..., dict[str, Any]]:
    """Make the record of a published notice about a trial."""

    def make(trial: str, kind: str, day: str) -> dict[str, Any]:
        return {
            "record": "integrity notice",
            "trial": trial,
            "notice": kind,
            "date": day,
            "reason": f"{kind} by the journal",
            "seen_by": "DD",
        }

    return make
