"""The verified results of one outcome, with all that decides whether and how a trial is analysed."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from treering.protocol import Outcome, Protocol
from treering.synthesis.standing import Entry, StateView, standing_of
from treering.terms import EntryKind

SIDES = ("intervention", "comparator")


@dataclass(frozen=True)
class TrialArm:
    """One arm as randomised: its name, its side of the contrast, its size (None where not recorded)."""

    name: str
    side: str
    randomised: int | None


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
        "included", "retracted", "on hold", "no usable result" or "people counted twice".
    flags : tuple of str
        Remarks printed beside the trial.
    risk_of_bias : str or None
        Overall judgement of this result, or None when there is none.
    basis : str
        How the result was verified: "agreed", "adjudicated" or "waiver".
    subgroup : mapping of str to str
        Level of each planned subgroup.
    design : str or None
        "parallel", "cluster" or "crossover", as recorded.
    design_effect : float
        By what the numbers of a cluster trial are divided before they are analysed; 1 elsewhere.
    registration : str or None
        Register number of the trial.
    randomised : int or None
        People randomised in the trial.
    arms : tuple of TrialArm
        Its arms, as recorded.
    held_since : str or None
        ISO date of the expression of concern that holds the trial out of the main analysis.
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
    design: str | None = None
    design_effect: float = 1.0
    registration: str | None = None
    randomised: int | None = None
    arms: tuple[TrialArm, ...] = ()
    held_since: str | None = None


def trial_rows(state: StateView, outcome: Outcome, protocol: Protocol) -> tuple[TrialRow, ...]:
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
    arms = arms_of(state)
    rows = [
        row_of(state, entry, protocol, arms)
        for entry in state.live(EntryKind.RESULT)
        if entry.body["outcome"] == outcome.id
    ]
    return in_order(rows)


def in_order(rows: Iterable[TrialRow]) -> tuple[TrialRow, ...]:
    """Return the rows by date of report, then trial id."""
    return tuple(sorted(rows, key=lambda row: (row.published, row.trial)))


def arms_of(state: StateView) -> dict[str, tuple[TrialArm, ...]]:
    """Return the arms of each trial, as recorded."""
    found: dict[str, tuple[TrialArm, ...]] = {}
    for entry in state.live(EntryKind.ARM):
        body = entry.body
        arm = TrialArm(str(body.get("label") or body["arm"]), body["side"], body.get("randomised"))
        found[body["trial"]] = (*found.get(body["trial"], ()), arm)
    return found


def row_of(
    state: StateView,
    entry: Entry,
    protocol: Protocol,
    arms: Mapping[str, tuple[TrialArm, ...]],
) -> TrialRow:
    """Make the row of one verified result, or of one reading, which has the same fields.

    Parameters
    ----------
    state : StateView
        The evidence.
    entry : Entry
        A result or an extraction.
    protocol : treering.protocol.Protocol
        Says what happens to a trial under an expression of concern.
    arms : mapping of str to tuple of TrialArm
        The arms of each trial.

    Returns
    -------
    TrialRow
    """
    body = entry.body
    trial, outcome = body["trial"], body["outcome"]
    standing = standing_of(state, trial, protocol.verification.concern)
    if body.get("not_usable"):
        why = f"no usable result: {body['not_usable']}"
        standing = replace(standing, status="no usable result", left_out=why)
    bias = state.get(f"bias/{trial}/{outcome}")
    verification = state.get(f"verification/{trial}/{outcome}")
    origins = body.get("origins") or {}
    study = getattr(state.get(f"study/{trial}"), "body", {})
    flags = standing.flags
    if bias is not None and bias.known_at < entry.known_at:
        flags = (*flags, "risk of bias was judged before these numbers came")
    if study.get("design") == "crossover" and {f"{side}_total" for side in SIDES} <= set(body["values"]):
        flags = (*flags, "crossover trial, analysed side against side: right for the first period only")
    return TrialRow(
        trial=trial,
        label=str(study.get("title") or trial),
        published=_published(state, body, entry),
        report=str(body.get("report") or ""),
        values=dict(body["values"]),
        status=standing.status,
        left_out=standing.left_out,
        flags=flags,
        risk_of_bias=None if bias is None else bias.body["overall"],
        basis="agreed" if verification is None else verification.body["basis"],
        imputed=any(origin == "imputed" for origin in origins.values()),
        subgroup=dict(body.get("subgroup") or {}),
        design=study.get("design"),
        registration=study.get("registration"),
        randomised=study.get("randomised"),
        arms=arms.get(trial, ()),
        held_since=standing.held_since,
    )


def _published(state: StateView, body: Mapping[str, Any], entry: Entry) -> str:
    report = state.get(f"report/{body.get('report')}")
    published = None if report is None else report.body.get("published")
    return str(published or entry.true_at)
