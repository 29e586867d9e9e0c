"""Differences between the trial rows of two analyses, each with its cause."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from treering.changes.entries import (
    ANY_KIND,
    DATA_KINDS,
    DESCRIPTION_KINDS,
    JUDGEMENT_KINDS,
    MEMBERSHIP_KINDS,
    Entry,
    Explanation,
    explain,
)
from treering.terms import EntryKind

Row = Mapping[str, Any]

#: Fields that are set together, and the kinds of entries that can set them. Weights and trial intervals are
#: left out: they follow from these.
GROUPS: dict[str, tuple[tuple[str, ...], tuple[EntryKind, ...]]] = {
    "facts": (("values", "report", "basis", "imputed"), DATA_KINDS),
    "effect": (("estimate", "standard_error", "intervention_total", "comparator_total"), DATA_KINDS),
    "membership": (("in_main", "left_out", "status"), MEMBERSHIP_KINDS),
    "judgement": (("risk_of_bias",), JUDGEMENT_KINDS),
    "description": (("label", "year", "published", "subgroup"), DESCRIPTION_KINDS),
    "flags": (("flags",), ANY_KIND),
}

#: Groups of stored facts: an amendment or new code cannot change them, so only an entry explains them.
STORED = frozenset({"facts", "judgement"})


@dataclass(frozen=True)
class Difference:
    """One difference of one trial row.

    ``patch`` holds the fields to set on the old row (None removes the row, the whole new row adds it).
    """

    trial: str
    group: str
    explanation: Explanation
    patch: Row | None
    fields: list[tuple[str, Any, Any]] = field(default_factory=list)


class Finder:
    """Finds the explanation of a difference of one trial.

    Parameters
    ----------
    entries : sequence of Entry
        Every entry since the previous version.
    known : set of str
        Trials that stood in any synthesis of the previous version.
    fallback : Explanation
        What concerns every trial at once: an amendment or new code, or nothing.
    """

    def __init__(self, entries: Sequence[Entry], known: set[str], fallback: Explanation) -> None:
        self.entries = entries
        self.known = known
        self.fallback = fallback

    def __call__(
        self, trial: str, synthesis: str, kinds: Sequence[EntryKind], *, stored: bool
    ) -> Explanation:
        """Return the explanation; a stored fact is explained by entries about its trial only."""
        found = explain(trial, synthesis, kinds, self.entries, trial_known=trial in self.known)
        return found if found.cause is not None or stored else self.fallback


def differences(
    before: Sequence[Row] | None, after: Sequence[Row] | None, synthesis: str, find: Finder
) -> list[Difference]:
    """Return every difference between two lists of trial rows.

    Parameters
    ----------
    before, after : sequence of mapping, or None
        The ``trials`` of the previous and the current analysis body; None where there is no synthesis, so
        that an amendment can explain why its trials come or go.
    synthesis : str
        Synthesis id.
    find : Finder
        Finds the explanation of each.

    Returns
    -------
    list of Difference
        In the order of the current rows; trials whose row is gone come last.
    """
    old = {row["trial"]: row for row in before or ()}
    new = {row["trial"] for row in after or ()}
    whole = before is None or after is None
    found: list[Difference] = []
    for row in after or ():
        trial = row["trial"]
        if trial in old:
            found += _row_differences(old[trial], row, synthesis, find)
        else:
            explanation = find(trial, synthesis, (*DATA_KINDS, *MEMBERSHIP_KINDS), stored=not whole)
            found.append(Difference(trial, "added", explanation, row))
    for trial in old:
        if trial not in new:
            explanation = find(trial, synthesis, MEMBERSHIP_KINDS, stored=not whole)
            found.append(Difference(trial, "removed", explanation, None))
    return found


def _row_differences(old: Row, new: Row, synthesis: str, find: Finder) -> list[Difference]:
    trial, found = new["trial"], []
    for group, (names, kinds) in GROUPS.items():
        changed = _changed_fields(old, new, names)
        if changed:
            explanation = find(trial, synthesis, kinds, stored=group in STORED)
            patch = {name: new.get(name) for name in names}
            found.append(Difference(trial, group, explanation, patch, changed))
    return found


def _changed_fields(old: Row, new: Row, names: Sequence[str]) -> list[tuple[str, Any, Any]]:
    changed = []
    for name in names:
        was, now = old.get(name), new.get(name)
        if isinstance(was, Mapping) and isinstance(now, Mapping):
            inner = sorted(set(was) | set(now))
            changed += [(f"{name}.{i}", was.get(i), now.get(i)) for i in inner if was.get(i) != now.get(i)]
        elif was != now:
            changed.append((name, was, now))
    return changed
