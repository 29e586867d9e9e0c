"""The ledger of arm use: proves that nobody is counted twice in one synthesis.

Within one synthesis the contrasts of a trial may together use no more participants, and no more events, of an
arm than the arm has (Cochrane Handbook, version 5.1, sections 9.3.1 and 16.5.3).
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from treering.effects import checks, columns
from treering.effects.joined_arms import by_single_arms
from treering.effects.rows import BoolArray, refuse
from treering.errors import AnalysisError

USES = ("synthesis", "trial", "arm", "participants")
ARMS = ("trial", "arm", "randomised")
# Shares such as a third add up to the whole only within floating-point error.
_NOISE = 1e-9


def arm_ledger(uses: pd.DataFrame, arms: pd.DataFrame) -> pd.DataFrame:
    """Add up the use of every arm in every synthesis, and refuse an arm used beyond what it has.

    Parameters
    ----------
    uses : DataFrame
        One row for each side of each contrast: ``synthesis``, ``trial``, ``arm``, ``participants`` and, for
        binary outcomes, ``events`` (empty elsewhere).
    arms : DataFrame
        One row for each arm: ``trial``, ``arm``, ``randomised`` and, if ``uses`` has ``events``, the arm's
        ``events`` (empty where not known). ``joins``, if there is such a column, lists for a joined arm the
        names of the arms in it (empty elsewhere): what is used of the joined arm is then charged to these,
        in proportion, so that nobody is counted once alone and once joined.

    Returns
    -------
    DataFrame
        Sorted by synthesis, trial and arm: these three, ``contrasts``, ``used``, ``randomised``, ``unused``
        and, with events, ``events_used`` and ``events``. That it is returned at all is the proof.

    Raises
    ------
    AnalysisError
        If a column is missing, an arm is unknown or listed twice, a figure is no count, or an arm is used
        beyond its participants or events; names the trial, the arm and the synthesis.
    """
    uses, arms = columns.as_table(uses), columns.as_table(arms)
    with_events = "events" in uses.columns
    fields = (*ARMS, "events") if with_events else ARMS
    _need(uses, USES)
    _need(arms, fields)
    known = _read(arms, "randomised", with_events, ARMS)
    twice = known.duplicated(["trial", "arm"]).to_numpy()
    _refuse(twice, known, "arm", "arm", "is listed twice", "one row for each arm")
    used = _read(uses, "participants", with_events, USES)
    if "joins" in known.columns:
        known, used = by_single_arms(known, used)
    ledger = _added_up(used, with_events)
    ledger = ledger.merge(known[list(fields)], on=["trial", "arm"], how="left", validate="many_to_one")
    _refuse(
        ledger["randomised"].isna().to_numpy(),
        ledger,
        "arm",
        "arm",
        "is not an arm of the trial",
        "a listed arm",
    )
    ledger["unused"] = ledger["randomised"] - ledger["used"]
    _within(ledger, "used", "randomised", "participants")
    if with_events:
        _within(ledger, "events_used", "events", "events")
    return ledger.sort_values(["synthesis", "trial", "arm"], ignore_index=True)


def arm_uses(contrasts: pd.DataFrame, synthesis: str) -> pd.DataFrame:
    """List what the contrasts of one synthesis use of each arm, ready for :func:`arm_ledger`.

    Parameters
    ----------
    contrasts : DataFrame
        One row for each contrast: ``trial``, ``intervention_arm``, ``comparator_arm``,
        ``intervention_total``, ``comparator_total`` and, for binary outcomes, ``intervention_events`` and
        ``comparator_events``. Where a side joins arms it bears the name under which ``arms`` lists them
        joined; only with ``joins`` in that list can :func:`arm_ledger` see the arms in it.
    synthesis : str
        Name of the synthesis.

    Returns
    -------
    DataFrame
        Two rows for each contrast: ``synthesis``, ``trial``, ``arm``, ``participants`` and, if given,
        ``events``.

    Raises
    ------
    AnalysisError
        If a column is missing.
    """
    contrasts = columns.as_table(contrasts)
    _need(contrasts, ("trial", *(f"{side}_{field}" for side in checks.ARMS for field in ("arm", "total"))))
    names = {"arm": "arm", "total": "participants"}
    if {"intervention_events", "comparator_events"} <= set(contrasts.columns):
        names["events"] = "events"
    sides = [
        contrasts[["trial", *(f"{side}_{field}" for field in names)]].set_axis(
            ["trial", *names.values()], axis=1
        )
        for side in checks.ARMS
    ]
    uses = pd.concat(sides, ignore_index=True)
    uses.insert(0, "synthesis", synthesis)
    return uses


def _read(table: pd.DataFrame, count: str, with_events: bool, fields: tuple[str, ...]) -> pd.DataFrame:
    """Read counts as numbers from zero; names and participants must be there, events may be empty."""
    labels = np.asarray(columns.column(table, "trial").to_numpy(), dtype=object)
    out = table.copy()
    for field in fields:
        if field != count:  # as objects, names of different types are simply different names
            out[field] = columns.column(table, field).astype(object)
            _refuse(out[field].isna().to_numpy(), out, field, field, "is missing", "a name")
    out[count] = columns.read_numbers(table, count, labels)
    _refuse(out[count].isna().to_numpy(), out, count, count, "is missing", "a count")
    for field in (count, "events") if with_events else (count,):
        out[field] = columns.read_numbers(table, field, labels)
        _refuse((out[field] < 0).to_numpy(), out, field, field, "is below zero", "0 or more")
    return out


def _added_up(uses: pd.DataFrame, with_events: bool) -> pd.DataFrame:
    groups = uses.groupby(["synthesis", "trial", "arm"], sort=False, dropna=False)
    ledger = groups.agg(contrasts=("participants", "size"), used=("participants", "sum"))
    if with_events:
        ledger["events_used"] = groups["events"].sum(min_count=1)
    ledger = ledger.reset_index()
    names = ["synthesis", "trial", "arm"]
    return ledger.astype(dict.fromkeys(names, object))


def _within(ledger: pd.DataFrame, used: str, limit: str, what: str) -> None:
    """No arm gives more than it has; an arm whose events are not known can only be checked for people."""
    excess = ledger[used] > ledger[limit] * (1 + _NOISE)
    _refuse(
        excess.to_numpy(),
        ledger,
        f"arm, {what}",
        used,
        f"the arm is used beyond its {what}",
        f"at most the arm's {what}; combine the arms or split the shared one",
    )


def _refuse(bad: BoolArray, table: pd.DataFrame, field: str, shown: str, problem: str, expected: str) -> None:
    """Refuse the first bad row, naming the arm and, where there is one, the synthesis."""

    def found(at: int) -> str:
        place = table.iloc[at]
        where = f" in synthesis {place['synthesis']}" if "synthesis" in table.columns else ""
        return f"{place[shown]} (arm {place['arm']}{where})"

    labels = np.asarray(table["trial"].to_numpy(), dtype=object)
    refuse(np.asarray(bad, dtype=bool), labels, field, found, problem, expected)


def _need(table: pd.DataFrame, fields: tuple[str, ...]) -> None:
    for field in fields:
        if field not in table.columns:
            raise AnalysisError(f"{field}: the column is missing.", expected=" ".join(fields))
