"""Trials with more than two arms: combine arms, or split the arm that several contrasts share.

Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), sections 7.7.3.8 and 16.5.4.
Which of the two is done is a rule of the protocol; :func:`treering.effects.arms.arm_ledger` proves
afterwards that nobody is counted twice.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence, Sized

import pandas as pd

from treering.effects import columns
from treering.effects.record import (
    NOT_STATED,
    Conversion,
    need,
    need_finite,
    need_people,
    need_positive,
    record,
)
from treering.effects.rows import refuse
from treering.errors import AnalysisError

COMBINE = "Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), table 7.7.a"
SPLIT = "Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), section 16.5.4"
_ADDED_UP = ("total", "events", "time")


def combine_binary(
    events: Sequence[float],
    totals: Sequence[float],
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Join arms with a binary outcome by adding events and participants.

    Parameters
    ----------
    events, totals : sequence of float
        One entry for each arm, two or more.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``events`` and ``total``.

    Raises
    ------
    AnalysisError
        If there are fewer than two arms, or events are not within their total.
    """
    _same_length(trial, events=events, totals=totals)
    for event, total in zip(events, totals, strict=True):
        need_positive(trial, total=total)
        need_finite(trial, events=event)
        need(0 <= event <= total, "events", event, "is not from 0 to the total", f"0 to {total}", trial)
    inputs = {**_numbered("events", events), **_numbered("total", totals)}
    result = {"events": float(sum(events)), "total": float(sum(totals))}
    return record("combine-arms-binary", COMBINE, inputs, result, origin, trial=trial)


def combine_continuous(
    means: Sequence[float],
    sds: Sequence[float],
    totals: Sequence[float],
    *,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Join arms with a continuous outcome as if nobody had ever divided them.

    :math:`M = \sum n_i m_i / N`, :math:`S^2 = \{\sum (n_i - 1) s_i^2 + \sum n_i (m_i - M)^2\}/(N - 1)`: what
    the mean and SD of all participants together would be (analysis of variance; for two arms the rule of
    table 7.7.a of the Handbook).

    Parameters
    ----------
    means, sds, totals : sequence of float
        One entry for each arm, two or more.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``mean``, ``sd`` and ``total``.

    Raises
    ------
    AnalysisError
        If there are fewer than two arms, or a figure cannot be right.
    """
    _same_length(trial, means=means, sds=sds, totals=totals)
    for mean, sd, total in zip(means, sds, totals, strict=True):
        need_finite(trial, mean=mean, sd=sd)
        need_people(trial, total=total)
        need(sd >= 0, "sd", sd, "is below zero", "an SD above zero", trial)
    whole = float(sum(totals))
    mean = sum(n * m for n, m in zip(totals, means, strict=True)) / whole
    within = sum((n - 1) * s**2 for n, s in zip(totals, sds, strict=True))
    between = sum(n * (m - mean) ** 2 for n, m in zip(totals, means, strict=True))
    inputs = {**_numbered("mean", means), **_numbered("sd", sds), **_numbered("total", totals)}
    result = {"mean": mean, "sd": math.sqrt((within + between) / (whole - 1)), "total": whole}
    return record("combine-arms-continuous", COMBINE, inputs, result, origin, trial=trial)


def split_shared_comparator(
    table: pd.DataFrame, *, trial: str = "trial", arm: str = "comparator_arm"
) -> pd.DataFrame:
    """Divide a comparator arm evenly among the contrasts of its trial that use it.

    Events, participants and person-time are divided; means and SDs stay (Handbook 5.1, section 16.5.4).
    Shares may be broken numbers: rounding would lose or invent people.

    Parameters
    ----------
    table : DataFrame
        Contrasts, one a row, with comparator columns as for
        :func:`~treering.effects.table.effect_sizes`, the trial and the comparator arm.
    trial, arm : str
        Names of the columns that tell the trial and its comparator arm.

    Returns
    -------
    DataFrame
        The table with divided comparator columns, and ``comparator_shared_by``, the number of contrasts that
        share the arm.

    Raises
    ------
    AnalysisError
        If a column is missing, a trial or arm is not named, or rows that share an arm disagree about its
        figures.
    """
    table = columns.as_table(table)
    _need_columns(table, trial, arm)
    labels = columns.trial_labels(table)
    for field in (trial, arm):
        unnamed = columns.column(table, field).isna().to_numpy()
        refuse(unnamed, labels, field, lambda _: "nothing", "is missing", "a name")
    groups = table.groupby([trial, arm], sort=False, dropna=False)
    shared = groups[arm].transform("size")
    figures = [field for field in table.columns if field.startswith("comparator_") and field != arm]
    for field in figures:
        columns.column(table, field)
        kinds = groups[field].transform("nunique", dropna=False).to_numpy()
        found = table[field].to_numpy(dtype=object)
        refuse(
            kinds > 1,
            labels,
            field,
            found,
            "differs between rows that share the arm",
            "one figure for one arm",
        )
    divided = table.copy()
    for field in figures:
        if field.removeprefix("comparator_") in _ADDED_UP:
            divided[field] = columns.read_counts(table, field, labels) / shared.to_numpy()
    divided["comparator_shared_by"] = shared
    return divided


def _need_columns(table: pd.DataFrame, *fields: str) -> None:
    for field in fields:
        if field not in table.columns:
            raise AnalysisError(f"{field}: the column is missing.")


def _same_length(trial: str | None, **fields: Sequence[float]) -> None:
    for field, values in fields.items():
        sized = isinstance(values, Sized) and not isinstance(values, str)
        need(sized, field, repr(values), "is no sequence", "one entry an arm", trial)
    lengths = {len(values) for values in fields.values()}
    need(len(lengths) == 1, ", ".join(fields), sorted(lengths), "differ in length", "one entry an arm", trial)
    need(min(lengths) >= 2, ", ".join(fields), min(lengths), "fewer than two arms", "two arms or more", trial)


def _numbered(name: str, values: Sequence[float]) -> dict[str, float | str]:
    return {f"{name}_{number}": float(value) for number, value in enumerate(values, start=1)}
