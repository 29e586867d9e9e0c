"""Readings that a third person left unresolved: what each of them would make of the synthesis.

An unresolved result waits and is not in the main analysis. Both readings are tried instead, one after the
other, and if the verdict of a look would differ, no crossing is declared at it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from treering.intake.pair import Waiting, judge, pending_readings
from treering.intake.settle import cases
from treering.intake.view import StateView as StoredState
from treering.monitoring import Look
from treering.protocol import Outcome, Protocol
from treering.synthesis.arms import without_double_counting
from treering.synthesis.estimates import Estimated, estimate_trials
from treering.synthesis.trials import TrialRow, arms_of, in_order, row_of
from treering.terms import EntryKind, Verdict

#: How the remark of a look begins at which no crossing was declared for this reason.
WITHHELD = "Without the unresolved readings the verdict would be: "
EFFICACY = frozenset({Verdict.BENEFIT_CROSSED, Verdict.HARM_CROSSED})


@dataclass(frozen=True)
class OpenReading:
    """One of two readings that stand against each other, with the synthesis as it would be with it.

    Parameters
    ----------
    trial, reader : str
        Whose reading of which trial.
    estimated : Estimated
        The trials of the outcome with this reading in the place of the trial's result.
    """

    trial: str
    reader: str
    estimated: Estimated


def open_readings(
    state: StoredState, rows: Sequence[TrialRow], outcome: Outcome, protocol: Protocol
) -> list[OpenReading]:
    """Return the unresolved readings of one outcome, each with the synthesis that it would make.

    Parameters
    ----------
    state : StateView
        The evidence as of one version.
    rows : sequence of TrialRow
        The verified results of the outcome.
    outcome : Outcome
        The outcome.
    protocol : Protocol
        The protocol in force.

    Returns
    -------
    list of OpenReading
        Ordered by trial, then reader; one trial at a time, the others as they are.
    """
    if not any(entry.body["unresolved"] for entry in state.live(EntryKind.ADJUDICATION)):
        return []
    arms = arms_of(state)
    found = []
    for case in cases(state):
        answer = judge(case, tolerance=protocol.verification.relative_tolerance)
        if case.outcome != outcome.id or not isinstance(answer, Waiting) or answer.needs != "unresolved":
            continue
        others = [row for row in rows if row.trial != case.trial]
        for entry in pending_readings(case):
            if entry.body["extractor"] in answer.readers:
                trials = in_order([*others, row_of(state, entry, protocol, arms)])
                estimated = estimate_trials(without_double_counting(trials), outcome)
                found.append(OpenReading(case.trial, str(entry.body["extractor"]), estimated))
    return found


def withheld(look: Look, earlier: Sequence[Look], standing: Verdict | None, under: Sequence[Look]) -> Look:
    """Declare no new crossing where the verdict hangs on readings that are not settled.

    Such a look spends nothing, so that the crossing can be judged when the readings are settled. The false
    alarms that this could add come from paths beyond the boundary of this look, and every one of these is
    counted in the alpha that the look would have spent: the plan's alpha holds.

    Parameters
    ----------
    look : Look
        The look on the verified results.
    earlier : sequence of Look
        The ledger before it.
    standing : Verdict or None
        Verdict that stood before it: a crossing declared earlier is not taken back by this.
    under : sequence of Look
        The same look with each of the open readings.

    Returns
    -------
    Look
        The look itself, or one that cannot be judged and spends nothing.
    """
    if look.verdict not in EFFICACY or look.verdict is standing:
        return look
    if all(other.verdict is look.verdict for other in under):
        return look
    why = (
        f"{WITHHELD}{look.verdict}. It depends on them, so no crossing is declared until a third person has "
        "settled them."
    )
    return replace(
        look,
        verdict=Verdict.CANNOT_BE_JUDGED,
        spends=False,
        alpha_spent=earlier[-1].alpha_spent if earlier else 0.0,
        boundary=None,
        redrawn_boundary=None,
        adjusted_low=None,
        adjusted_high=None,
        remarks=(why, *(told for told in look.remarks if told.startswith("Amendment"))),
    )


def before_withheld(ledger: Sequence[Look]) -> list[Look]:
    """Return the ledger without the looks at its end at which a crossing was withheld.

    They spent nothing and judged nothing: when the readings are settled without new numbers (the result turns
    out not to be usable), the same evidence is looked at as if for the first time.
    """
    kept = list(ledger)
    while kept and kept[-1].remarks and kept[-1].remarks[0].startswith(WITHHELD):
        kept.pop()
    return kept
