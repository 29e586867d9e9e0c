"""The verified results of one outcome, with all that decides whether and how a trial is analysed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Protocol

from treering.protocol import Outcome
from treering.protocol import Protocol as ReviewProtocol
from treering.terms import EntryKind, NoticeKind


class Entry(Protocol):
    """What synthesis reads of a stored entry."""

    @property
    def key(self) -> str:
        """Key of the entry."""
        ...

    @property
    def body(self) -> Mapping[str, Any]:
        """Content of the entry."""
        ...

    @property
    def true_at(self) -> str:
        """ISO date at which it was true."""
        ...


class StateView(Protocol):
    """What synthesis reads of the state of the evidence store."""

    def live(self, kind: EntryKind) -> Sequence[Entry]:
        """Return the live entries of one kind, ordered by key."""
        ...

    def get(self, key: str) -> Entry | None:
        """Return the live entry with this key, or None."""
        ...


@dataclass(frozen=True)
class TrialRow:
    """One trial in one synthesis, before any number is computed from it.

    Parameters
    ----------
    trial, label, published, report : str
        Id, name for readers, ISO date of the report, id of the report.
    values : mapping of str to float
        Verified numbers under the column names of `treering.effects.effect_sizes`.
    left_out : str or None
        Why the trial is not in the main analysis; None when it is in.
    status : str
        "included", "retracted", "on hold" or "no usable result".
    flags : tuple of str
        Remarks printed beside the trial.
    risk_of_bias : str or None
        Overall judgement of this result, or None when there is none.
    basis : str
        How the result was verified: "agreed", "adjudicated" or "waiver".
    subgroup : mapping of str to str
        Level of each planned subgroup.
    """

    trial: str
    label: str
    published: str
    report: str
    values: Mapping[str, float]
    status: str = "included"
    left_out: str | None = None
    flags: tuple[str, ...] = ()
    risk_of_bias: str | None = None
    basis: str = "agreed"
    imputed: bool = False
    subgroup: Mapping[str, str] = field(default_factory=dict)


def trial_rows(state: StateView, outcome: Outcome, protocol: ReviewProtocol) -> tuple[TrialRow, ...]:
    """Collect the verified results of one outcome, ordered by date of report, then trial id.

    Parameters
    ----------
    state : StateView
        The evidence as of one version.
    outcome : Outcome
        The outcome of the protocol.
    protocol : treering.protocol.Protocol
        Says what happens to a trial under an expression of concern.

    Returns
    -------
    tuple of TrialRow
    """
    rows = [
        _row(state, entry, protocol)
        for entry in state.live(EntryKind.RESULT)
        if entry.body["outcome"] == outcome.id
    ]
    return tuple(sorted(rows, key=lambda row: (row.published, row.trial)))


def _row(state: StateView, entry: Entry, protocol: ReviewProtocol) -> TrialRow:
    body = entry.body
    trial, outcome = body["trial"], body["outcome"]
    status, left_out, flags = _standing(state, trial, protocol.verification.concern)
    if body.get("not_usable"):
        status, left_out = "no usable result", f"no usable result: {body['not_usable']}"
    bias = state.get(f"bias/{trial}/{outcome}")
    verification = state.get(f"verification/{trial}/{outcome}")
    origins = body.get("origins") or {}
    return TrialRow(
        trial=trial,
        label=_label(state, trial),
        published=_published(state, body, entry),
        report=str(body.get("report") or ""),
        values=dict(body["values"]),
        status=status,
        left_out=left_out,
        flags=flags,
        risk_of_bias=None if bias is None else bias.body["overall"],
        basis="agreed" if verification is None else verification.body["basis"],
        imputed=any(origin == "imputed" for origin in origins.values()),
        subgroup=dict(body.get("subgroup") or {}),
    )


def _label(state: StateView, trial: str) -> str:
    study = state.get(f"study/{trial}")
    title = None if study is None else study.body.get("title")
    return str(title or trial)


def _published(state: StateView, body: Mapping[str, Any], entry: Entry) -> str:
    report = state.get(f"report/{body.get('report')}")
    published = None if report is None else report.body.get("published")
    return str(published or entry.true_at)


def _standing(state: StateView, trial: str, concern: str) -> tuple[str, str | None, tuple[str, ...]]:
    """Say what the published notices about a trial do to it: status, reason left out, flags."""
    notices = sorted(
        (entry for entry in state.live(EntryKind.INTEGRITY) if entry.body["trial"] == trial),
        key=lambda entry: (entry.true_at, entry.key),
    )
    status, left_out, flags = "included", None, []
    for entry in notices:
        notice = NoticeKind(entry.body["notice"])
        flags.append(f"{notice.value}, {entry.true_at}")
        if notice is NoticeKind.RETRACTION:
            status, left_out = "retracted", f"report retracted on {entry.true_at}"
        elif notice is NoticeKind.REINSTATEMENT:
            status, left_out = "included", None
        elif notice is NoticeKind.EXPRESSION_OF_CONCERN and concern == "hold" and status == "included":
            status, left_out = "on hold", f"expression of concern on {entry.true_at}: on hold by protocol"
    return status, left_out, tuple(flags)
