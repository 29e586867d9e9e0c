"""One weekly update as plain functions; flows/ calls the same steps one by one."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from treering.intake import file_away, give_back, settle
from treering.notify import deliver, pending
from treering.records import NewEntry
from treering.store import EvidenceStore, State
from treering.synthesis import plain
from treering.terms import EntryKind
from treering.update.context import RunContext, open_evidence
from treering.update.laying_down import lay_down
from treering.update.publishing import publish_index, publish_version, status_of, unpublished
from treering.update.taking_in import TakenIn, moved, read_intake, verify
from treering.update.versions import Analyses, Basis, analyse_synthesis, changes_of, next_basis


@dataclass(frozen=True)
class Summary:
    """What one update did, for people and for the command line.

    Parameters
    ----------
    day : str
        ISO date of the run.
    version : int or None
        The version that was laid down; None in a quiet week.
    returned : tuple of dict
        Files given back: file, faults.
    remarks : tuple of str
        What someone should look at although it was taken in.
    waiting : tuple of dict
        Results not verified yet: trial, outcome, why.
    verdicts : dict
        Verdict by monitored synthesis.
    told : tuple of dict
        Notices delivered: person, event, synthesis.
    undelivered : tuple of str
        What could not be delivered, a sentence each.
    index : str
        Path of reports/index.html.
    """

    day: str
    version: int | None
    returned: tuple[dict[str, Any], ...]
    remarks: tuple[str, ...]
    waiting: tuple[dict[str, Any], ...]
    verdicts: dict[str, str]
    told: tuple[dict[str, Any], ...]
    undelivered: tuple[str, ...]
    index: str


@contextmanager
def evidence(context: RunContext) -> Iterator[EvidenceStore]:
    """Open the review's evidence store for one step, making it on the first run."""
    with open_evidence(context.review, make=True) as store:
        yield store


@contextmanager
def one_writer(context: RunContext) -> Iterator[Callable[[], None]]:
    """Hold the store's writer lock for a whole update.

    Each step opens the store for itself, so the steps cannot see the lock: call what this yields before a
    step that writes, and it raises a StoreError when the lock was lost meanwhile.

    Raises
    ------
    StoreBusyError
        When another update holds it.
    """
    with evidence(context) as store, store.exclusive():
        yield store.check_exclusive


def step_read(context: RunContext) -> TakenIn:
    """Read and check the intake folder; writes nothing."""
    with evidence(context) as store:
        return read_intake(context.review, store.state(), context.day)


def step_verify(context: RunContext, read: TakenIn) -> TakenIn:
    """Pair extractions and settle what two people, or a third, agree on; writes nothing."""
    with evidence(context) as store:
        return verify(context.review, store.state(), read, context.known_at)


def step_append(context: RunContext, taken: TakenIn) -> None:
    """Append everything of this run in one transaction, then move the files to filed/ or returned/.

    The files move after the commit: a run that dies between leaves files whose receipt is stored, and the
    next run only moves them.
    """
    with evidence(context) as store:
        store.append(taken.entries, known_at=context.known_at)
    for dropped in taken.checked.returned:
        give_back(context.review.intake, dropped, taken.checked.faults_of(dropped))
    for dropped in moved(taken.checked):
        file_away(context.review.intake, dropped)


def step_basis(context: RunContext) -> Basis | None:
    """Say what the next version is made from; None when nothing calls for one."""
    with evidence(context) as store:
        return next_basis(
            store.state(), store.versions(), date=context.day, code_version=context.code_version
        )


def step_lay_down(
    context: RunContext, basis: Basis, analyses: Analyses, changes: dict[str, dict[str, Any]]
) -> None:
    """Lay the version down in one transaction."""
    with evidence(context) as store:
        lay_down(store, context, basis, analyses, changes)


def step_publish(context: RunContext) -> tuple[str, ...]:
    """Publish every version that has no release yet, also one that an earlier run left behind."""
    with evidence(context) as store:
        return tuple(str(publish_version(store, context, body)) for body in unpublished(store))


def step_notify(context: RunContext) -> tuple[str, ...]:
    """Deliver every stored notice that has no delivery yet; one that fails stays for the next run.

    Returns
    -------
    tuple of str
        One sentence per notice that could not be delivered.
    """
    failures = []
    with evidence(context) as store:
        for notice in pending(store.state()):
            sent = deliver(
                notice,
                context.review.protocol.delivery,
                context.review.outbox,
                context.day,
                panel=context.review.panel,
            )
            if sent.entry is not None:
                store.append([sent.entry], known_at=context.known_at)
            if sent.failure is not None:
                failures.append(sent.failure)
    return tuple(failures)


def step_close(context: RunContext, taken: TakenIn, failures: tuple[str, ...]) -> Summary:
    """Record the run, renew the status line and say what was done.

    What was done is read back from the store: a run that died and was started again must close with the
    same words as one that was never disturbed.
    """
    with evidence(context) as store:
        done = run_record(context, store.state())
        run = NewEntry(EntryKind.RUN, f"run/{context.known_at}", done, true_at=context.day)
        store.append([run], known_at=context.known_at)
        state = store.state()
        status = status_of(state, context.day, context.review, len(done["waiting"]))
        index = publish_index(store, context.review, status=status)
        return Summary(
            day=context.day,
            version=done["version"],
            returned=tuple(done["returned"]),
            remarks=tuple(taken.remarks),
            waiting=tuple(done["waiting"]),
            verdicts=latest_verdicts(state),
            told=tuple(_told(context, state)),
            undelivered=failures,
            index=str(index),
        )


def latest_verdicts(state: State) -> dict[str, str]:
    """Return the verdict of the latest look of each monitored synthesis."""
    looks = sorted((entry.body for entry in state.live(EntryKind.LOOK)), key=lambda body: body["number"])
    return {body["synthesis"]: body["verdict"] for body in looks}


def _told(context: RunContext, state: State) -> Iterator[dict[str, Any]]:
    for entry in state.all(EntryKind.DELIVERY):
        notice = state.get(entry.body["notice"])
        if entry.known_at == context.known_at and notice is not None:
            yield {name: notice.body[name] for name in ("person", "event", "synthesis", "version")}


def run_record(context: RunContext, state: State) -> dict[str, Any]:
    """Return what the run at `context.known_at` did, as the store knows it."""
    mine = [entry for entry in state.everything() if entry.known_at == context.known_at]
    version = next((e.body["version"] for e in mine if e.kind is EntryKind.VERSION), None)
    returned = [e.body for e in mine if e.kind is EntryKind.RECEIPT and e.body.get("faults")]
    waiting = settle(state, context.review.protocol).waiting
    return {
        "as_of": context.known_at,
        "version": version,
        "outcome": f"version {version}" if version else "nothing new",
        "returned": [{"file": body["file"], "faults": body["faults"]} for body in returned],
        "waiting": plain(
            [{name: item.get(name) for name in ("trial", "outcome", "why")} for item in waiting]
        ),
    }


def run_update(context: RunContext) -> Summary:
    """Run one weekly update without the engine.

    Parameters
    ----------
    context : RunContext
        The review, the time and the code version, fixed once.

    Returns
    -------
    Summary

    Raises
    ------
    TreeringError
        Of the kind that says what stopped the update; what was committed before stays.
    """
    with one_writer(context) as still_held:
        taken = step_verify(context, step_read(context))
        still_held()
        step_append(context, taken)
        basis = step_basis(context)
        if basis is not None:
            analyses = {o.id: analyse_synthesis(basis, o.id) for o in basis.protocol.outcomes}
            changes = changes_of(basis, analyses)
            still_held()
            step_lay_down(context, basis, analyses, changes)
        still_held()
        step_publish(context)
        failures = step_notify(context)
        still_held()
        return step_close(context, taken, failures)
