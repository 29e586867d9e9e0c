"""Cluster-randomised trials: effective numbers are analysed, raw numbers printed, and a flag says so."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import pandas as pd

from treering.effects import effective_table
from treering.synthesis.trials import TrialRow

FIGURES = ("mean_cluster_size", "icc")
CLUSTERED = (*FIGURES, "clusters")


def effective_values(values: Mapping[str, Mapping[str, float]]) -> pd.DataFrame:
    """Return the numbers of trials as a table, those of cluster trials divided by their design effects.

    Parameters
    ----------
    values : mapping of str to mapping
        Verified numbers by trial.

    Returns
    -------
    DataFrame
        One row per trial, ready for `treering.effects.effect_sizes`: effective and not raw numbers reach the
        estimate and the information. ``design_effect`` is there when some trial has one.
    """
    table = pd.DataFrame([dict(numbers) for numbers in values.values()], index=list(values))
    if not set(FIGURES) <= set(table.columns):
        return table
    known = table[list(FIGURES)].notna().all(axis=1)
    table.loc[~known, list(FIGURES)] = float("nan")
    return effective_table(table.rename(columns={"icc": "intracluster_correlation"}))


def with_clusters(rows: Sequence[TrialRow], table: pd.DataFrame) -> list[TrialRow]:
    """Mark the cluster trials with their design effect, and say how their numbers were taken.

    Parameters
    ----------
    rows : sequence of TrialRow
        Trials of one synthesis.
    table : DataFrame
        What `effective_values` gave for those with numbers.

    Returns
    -------
    list of TrialRow
    """
    reported = set(table.attrs.get("taken_as_reported", ()))
    effects = table["design_effect"].to_dict() if "design_effect" in table else {}
    return [
        _marked(row, float(effects.get(row.trial, 1.0)), as_reported=row.trial in reported) for row in rows
    ]


def _marked(row: TrialRow, effect: float, *, as_reported: bool) -> TrialRow:
    clustered = row.design == "cluster" or any(name in row.values for name in CLUSTERED)
    if not clustered or row.status == "no usable result":
        return row
    if as_reported:
        flag = "cluster trial, effect taken as reported: right only if the report allowed for clustering"
    elif not set(FIGURES) <= set(row.values):
        flag = "cluster trial, taken as reported: no intracluster correlation and cluster size are recorded"
    else:
        people = sum(row.values.get(f"{side}_total", 0) for side in ("intervention", "comparator"))
        counted = f": {people:g} people count as {people / effect:.0f}" if people else ""
        flag = f"cluster trial, design effect {effect:.4g}{counted}"
    return replace(row, design_effect=effect, flags=(*row.flags, flag))
