"""Which entry of the store explains a difference, and which cause that entry stands for.

An entry's own ``cause`` always wins. Without one, the kind of the entry decides where it can: a retraction
notice is a retraction, a replaced result is a correction. What no entry explains stays without a cause, and
:func:`treering.changes.compare` lists it as uncaused.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import Any, Protocol

from treering.terms import Cause, EntryKind, NoticeKind


class Entry(Protocol):
    """The attributes of a stored entry that a comparison reads."""

    @property
    def kind(self) -> str:
        """What the entry records."""

    @property
    def key(self) -> str:
        """Key of the entry."""

    @property
    def body(self) -> Mapping[str, Any]:
        """Content of the entry."""

    @property
    def cause(self) -> str | None:
        """Cause the writer named, if any."""

    @property
    def reason(self) -> str | None:
        """Reason the writer gave, if any."""

    @property
    def replaces(self) -> int | None:
        """Sequence number of the entry this one replaces."""

    @property
    def seq(self) -> int:
        """Sequence number."""


@dataclass(frozen=True)
class Explanation:
    """The cause of one difference with the entries behind it."""

    cause: Cause | None
    reason: str | None
    entries: tuple[int, ...]


UNCAUSED = Explanation(None, None, ())

#: Kinds of entries that can explain each group of fields, the most telling kind first.
DATA_KINDS = (EntryKind.RESULT, EntryKind.VERIFICATION, EntryKind.WAIVER, EntryKind.REPORT, EntryKind.ARM)
MEMBERSHIP_KINDS = (
    EntryKind.INTEGRITY,
    EntryKind.WITHDRAWAL,
    EntryKind.SCREENING,
    EntryKind.RESULT,
    EntryKind.WAIVER,
    EntryKind.RISK_OF_BIAS,
)
JUDGEMENT_KINDS = (EntryKind.RISK_OF_BIAS,)
DESCRIPTION_KINDS = (EntryKind.STUDY, EntryKind.REPORT, EntryKind.ARM, EntryKind.RESULT)
ANY_KIND = tuple(EntryKind)

_NOTICE_CAUSES = {
    NoticeKind.RETRACTION: Cause.RETRACTION,
    NoticeKind.ERRATUM: Cause.CORRECTION,
    NoticeKind.EXPRESSION_OF_CONCERN: Cause.INTEGRITY_NOTICE,
    NoticeKind.REINSTATEMENT: Cause.INTEGRITY_NOTICE,
}
_KIND_CAUSES = {
    EntryKind.RISK_OF_BIAS: Cause.RISK_OF_BIAS,
    EntryKind.CERTAINTY: Cause.CERTAINTY,
    EntryKind.PROTOCOL: Cause.PROTOCOL,
    EntryKind.AMENDMENT: Cause.PROTOCOL,
    EntryKind.WITHDRAWAL: Cause.CORRECTION,
    EntryKind.SCREENING: Cause.CORRECTION,
    EntryKind.STUDY: Cause.CORRECTION,
    EntryKind.ARM: Cause.CORRECTION,
    EntryKind.REPORT: Cause.NEW_REPORT,
}


def cause_of(entry: Entry, *, trial_known: bool = True) -> Cause | None:
    """Return the cause an entry stands for.

    Parameters
    ----------
    entry : Entry
        A stored entry.
    trial_known : bool
        Whether the trial stood in any synthesis of the previous version; tells a new trial from a new
        report of an included one.

    Returns
    -------
    Cause or None
        None when neither the writer nor the kind of the entry names one.
    """
    if entry.cause is not None:
        return Cause(entry.cause)
    kind = EntryKind(entry.kind)
    if kind is EntryKind.INTEGRITY:
        return _NOTICE_CAUSES[NoticeKind(entry.body["notice"])]
    if kind is EntryKind.RESULT:
        if entry.replaces is not None:
            return Cause.CORRECTION
        return Cause.NEW_REPORT if trial_known else Cause.NEW_TRIAL
    if kind is EntryKind.REPORT and entry.replaces is not None:
        return Cause.CORRECTION
    return _KIND_CAUSES.get(kind)


def explain(
    trial: str,
    synthesis: str,
    kinds: Collection[EntryKind],
    entries: Iterable[Entry],
    *,
    trial_known: bool = True,
) -> Explanation:
    """Find the entries about one trial that explain a difference, and their cause.

    Parameters
    ----------
    trial, synthesis : str
        Where the difference stands.
    kinds : collection of EntryKind
        Kinds that can explain it, the most telling first.
    entries : iterable of Entry
        All entries since the previous version.
    trial_known : bool
        See :func:`cause_of`.

    Returns
    -------
    Explanation
        Without a cause when no such entry exists.
    """
    order = list(kinds)
    about = [e for e in entries if e.kind in kinds and _is_about(e, trial, synthesis)]
    about.sort(key=lambda e: (order.index(EntryKind(e.kind)), -e.seq))
    for entry in about:
        cause = cause_of(entry, trial_known=trial_known)
        if cause is not None:
            same = sorted(e.seq for e in about if cause_of(e, trial_known=trial_known) is cause)
            return Explanation(cause, entry.reason or entry.body.get("reason"), tuple(same))
    return UNCAUSED


def _is_about(entry: Entry, trial: str, synthesis: str) -> bool:
    if entry.kind == EntryKind.WITHDRAWAL:
        steps = entry.key.split("/")
        return trial in steps and (synthesis in steps or len(steps) < 3)
    return entry.body.get("trial") == trial and entry.body.get("outcome", synthesis) == synthesis
