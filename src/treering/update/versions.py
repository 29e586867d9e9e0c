"""From the state of the evidence to a version: what changed, each synthesis, the comparison, the draft."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from treering.changes import compare
from treering.monitoring import Look
from treering.protocol import Protocol
from treering.store import State, StoredEntry
from treering.synthesis import analyse, repool_rows
from treering.terms import EntryKind

#: A version is laid down when one of these is new: evidence, a judgement, the plan, or a defect made good.
TRIGGERS = frozenset(
    {
        EntryKind.RESULT,
        EntryKind.RISK_OF_BIAS,
        EntryKind.CERTAINTY,
        EntryKind.INTEGRITY,
        EntryKind.AMENDMENT,
        EntryKind.WITHDRAWAL,
        EntryKind.DEFECT,
    }
)

Analyses = Mapping[str, dict[str, Any]]


@dataclass(frozen=True)
class Basis:
    """What a version is made from: all of it comes from the store.

    Parameters
    ----------
    version : int
        Number of the version.
    date : str
        ISO date of the run that lays it down.
    protocol : Protocol
        The protocol in force.
    state : State
        The evidence, with looks and analyses of earlier versions only.
    previous : mapping of str to dict
        Analyses of the version before; empty for the base version.
    fresh : tuple of StoredEntry
        Entries since the version before.
    code_versions : tuple
        Code version of the version before (None for the base version) and of this one.
    """

    version: int
    date: str
    protocol: Protocol
    state: State
    previous: Analyses
    fresh: tuple[StoredEntry, ...]
    code_versions: tuple[str | None, str]

    @property
    def causes(self) -> tuple[str, ...]:
        """Why the version exists: causes of its new entries, in the order of the vocabulary."""
        named = {entry.cause for entry in self.fresh if entry.cause and entry.kind in TRIGGERS}
        return tuple(sorted(str(cause) for cause in named))


def stored_protocol(state: State) -> Protocol:
    """Return the protocol whose text is in `state`."""
    entry = state.get("protocol")
    if entry is None:
        raise LookupError("a state that has results holds a protocol")
    return Protocol.model_validate(tomllib.loads(entry.body["text"]))


def looks_of(state: State, synthesis: str) -> tuple[Look, ...]:
    """Return the ledger of one synthesis, oldest look first."""
    rows = [entry.body for entry in state.live(EntryKind.LOOK) if entry.body["synthesis"] == synthesis]
    rows.sort(key=lambda body: body["number"])
    return tuple(
        Look.from_dict({name: value for name, value in body.items() if name != "synthesis"}) for body in rows
    )


def analyses_of(state: State, version: int) -> dict[str, dict[str, Any]]:
    """Return the analysis bodies stored for `version`, by synthesis id."""
    return {
        entry.body["synthesis"]: dict(entry.body)
        for entry in state.live(EntryKind.ANALYSIS)
        if entry.body["version"] == version
    }


def next_basis(
    state: State, versions: Sequence[Mapping[str, Any]], *, date: str, code_version: str
) -> Basis | None:
    """Return what the next version would be made from; None when nothing calls for one.

    Parameters
    ----------
    state : State
        Everything in the store.
    versions : sequence of mapping
        Version bodies so far, in order.
    date : str
        ISO date of the run.
    code_version : str
        Version of this program.

    Returns
    -------
    Basis or None
    """
    last = versions[-1] if versions else None
    since = -1 if last is None else int(last["entries"])
    fresh = tuple(entry for entry in state.everything() if entry.seq > since)
    if not any(entry.kind in TRIGGERS for entry in fresh) or not state.live(EntryKind.RESULT):
        return None
    return Basis(
        version=len(versions) + 1,
        date=date,
        protocol=stored_protocol(state),
        state=state,
        previous={} if last is None else analyses_of(state, int(last["version"])),
        fresh=fresh,
        code_versions=(None if last is None else str(last["code_version"]), code_version),
    )


def analyse_synthesis(basis: Basis, outcome_id: str) -> dict[str, Any]:
    """Analyse one outcome of the version that `basis` describes."""
    outcome = basis.protocol.outcome(outcome_id)
    if outcome is None:
        raise LookupError(f"no outcome {outcome_id} in the protocol")
    return analyse(
        basis.state,
        outcome,
        basis.protocol,
        version=basis.version,
        date=basis.date,
        earlier=looks_of(basis.state, outcome_id),
    )


def changes_of(basis: Basis, analyses: Analyses) -> dict[str, dict[str, Any]]:
    """Say what differs from the version before, by synthesis and cause; the parts add up."""

    def repool(synthesis: str, rows: Sequence[Mapping[str, Any]]) -> float | None:
        outcome = basis.protocol.outcome(synthesis)
        return None if outcome is None else repool_rows(outcome, rows)

    return compare(basis.previous or None, analyses, basis.fresh, basis.code_versions, repool=repool)
