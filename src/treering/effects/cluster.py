"""Cluster-randomised trials analysed as if people had been randomised: design effect and effective numbers.

Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), sections 16.3.4 to 16.3.6; for
clusters of varying size Eldridge, Ashby and Kerry 2006, Int J Epidemiol 35:1292.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from treering.effects import checks, columns
from treering.effects.record import NOT_STATED, Conversion, need, need_finite, need_positive, record
from treering.effects.rows import BoolArray, FloatArray, TextArray, refuse
from treering.errors import AnalysisError

HANDBOOK = "Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011), section 16.3"
ELDRIDGE = "Eldridge, Ashby and Kerry 2006, Int J Epidemiol 35:1292"
COLUMNS = ("mean_cluster_size", "intracluster_correlation")
_DIVIDED = tuple(f"{arm}_{field}" for arm in checks.ARMS for field in ("events", "total", "time"))


def design_effect(
    mean_cluster_size: float,
    intracluster_correlation: float,
    *,
    size_variation: float = 0.0,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    r"""Factor by which clustering inflates a variance: :math:`1 + \{(1 + cv^2) m - 1\} \rho`.

    Parameters
    ----------
    mean_cluster_size : float
        Mean number m of participants in a cluster, one or more.
    intracluster_correlation : float
        Intracluster correlation rho, from 0 to 1; where it comes from belongs in ``origin``.
    size_variation : float
        Coefficient of variation cv of cluster size (SD over mean); 0 for equal clusters.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With result ``design_effect``, one or more.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_finite(trial, mean_cluster_size=mean_cluster_size, size_variation=size_variation)
    fits = mean_cluster_size >= 1
    need(fits, "mean_cluster_size", mean_cluster_size, "is below one", "one or more", trial)
    need(size_variation >= 0, "size_variation", size_variation, "is below zero", "0 or more", trial)
    need_finite(trial, intracluster_correlation=intracluster_correlation)
    fits = 0 <= intracluster_correlation <= 1
    need(fits, "intracluster_correlation", intracluster_correlation, "is not from 0 to 1", "0 to 1", trial)
    inputs: dict[str, float | str] = {
        "mean_cluster_size": mean_cluster_size,
        "intracluster_correlation": intracluster_correlation,
        "size_variation": size_variation,
    }
    effect = 1 + ((1 + size_variation**2) * mean_cluster_size - 1) * intracluster_correlation
    name, source = (
        ("design-effect", HANDBOOK) if size_variation == 0 else ("design-effect-varying-size", ELDRIDGE)
    )
    return record(name, source, inputs, {"design_effect": effect}, origin, trial=trial)


def effective_numbers(
    total: float,
    factor: float,
    *,
    events: float | None = None,
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Effective participants, and events, of one arm: both divided by the design effect.

    Parameters
    ----------
    total : float
        Participants of the arm.
    factor : float
        Design effect, one or more.
    events : float, optional
        Events of the arm; means and SDs of continuous outcomes need no change.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``total`` and, if given, ``events``; not rounded.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_positive(trial, total=total)
    need_finite(trial, factor=factor)
    need(factor >= 1, "factor", factor, "is below one", "a design effect of one or more", trial)
    inputs: dict[str, float | str] = {"total": total, "factor": factor}
    result = {"total": total / factor}
    if events is not None:
        need_finite(trial, events=events)
        need(0 <= events <= total, "events", events, "is not from 0 to the total", f"0 to {total}", trial)
        inputs["events"], result["events"] = events, events / factor
    return record("effective-numbers", f"{HANDBOOK}.4", inputs, result, origin, trial=trial)


def inflated_variance(
    variance: float, factor: float, *, trial: str | None = None, origin: str = NOT_STATED
) -> Conversion:
    """Variance of an estimate that ignored clustering, times the design effect.

    Parameters
    ----------
    variance : float
        Variance on the scale of the analysis.
    factor : float
        Design effect, one or more.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``variance`` and ``standard_error``.

    Raises
    ------
    AnalysisError
        If an input cannot be right.
    """
    need_positive(trial, variance=variance)
    need_finite(trial, factor=factor)
    need(factor >= 1, "factor", factor, "is below one", "a design effect of one or more", trial)
    inputs: dict[str, float | str] = {"variance": variance, "factor": factor}
    result = {"variance": variance * factor, "standard_error": float(np.sqrt(variance * factor))}
    return record("inflated-variance", f"{HANDBOOK}.6", inputs, result, origin, trial=trial)


def effective_table(table: pd.DataFrame) -> pd.DataFrame:
    """Divide the numbers of the cluster-randomised trials of a table by their design effects.

    Parameters
    ----------
    table : DataFrame, k rows
        Columns as for :func:`~treering.effects.table.effect_sizes`, with ``mean_cluster_size`` and
        ``intracluster_correlation`` (both empty for a trial that randomised people) and, if known,
        ``cluster_size_variation``.

    Returns
    -------
    DataFrame, k rows
        The table with effective events, totals and person-time, and ``design_effect``: 1 where people were
        randomised, and where a cluster trial gives no arm-level figures to divide. The latter are listed in
        ``attrs["taken_as_reported"]`` (labels): their reported effect is right only if the report allowed for
        clustering; if not, its variance needs :func:`inflated_variance`.

    Raises
    ------
    AnalysisError
        If a column is missing, only one of both figures is given, or a figure cannot be right.
    """
    table = columns.as_table(table)
    for field in COLUMNS:
        if field not in table.columns:
            raise AnalysisError(f"{field}: the column is missing.", expected=" ".join(COLUMNS))
    labels = columns.trial_labels(table)
    divisible = _has_arms(table)
    wanted = _design_effects(table, labels)
    effect = np.where(divisible, wanted, 1.0)
    out = table.copy()
    for field in _DIVIDED:
        if field in table.columns:
            out[field] = columns.read_counts(table, field, labels) / effect
    out["design_effect"] = effect
    out.attrs["taken_as_reported"] = tuple(labels[~divisible & (wanted > 1)])
    return out


def _has_arms(table: pd.DataFrame) -> BoolArray:
    """Tell which rows give one of the sets of arm-level figures in full."""
    found = np.zeros(len(table), dtype=bool)
    for second in ("events", "mean"):
        for base in ("total", "time"):
            fields = [f"{arm}_{field}" for arm in checks.ARMS for field in (second, base)]
            if set(fields) <= set(table.columns):
                found |= table[fields].notna().all(axis=1).to_numpy()
    return found


def _design_effects(table: pd.DataFrame, labels: TextArray) -> FloatArray:
    """Vectorised :func:`design_effect`; 1 for rows without cluster figures."""
    size, icc = (columns.read_numbers(table, field, labels) for field in COLUMNS)
    single = np.isnan(size) & np.isnan(icc)
    for field, values in zip(COLUMNS, (size, icc), strict=True):
        refuse(
            np.isnan(values) & ~single, labels, field, values, "is missing for a cluster trial", "a number"
        )
    refuse(size < 1, labels, COLUMNS[0], size, "is below one", "one or more")
    refuse((icc < 0) | (icc > 1), labels, COLUMNS[1], icc, "is not from 0 to 1", "0 to 1")
    variation = np.zeros(len(table))
    if "cluster_size_variation" in table.columns:
        variation = np.nan_to_num(columns.read_numbers(table, "cluster_size_variation", labels))
    refuse(variation < 0, labels, "cluster_size_variation", variation, "is below zero", "0 or more")
    with np.errstate(over="ignore"):
        effect = np.where(single, 1.0, 1 + ((1 + variation**2) * size - 1) * icc)
    refuse(np.isinf(effect), labels, COLUMNS[0], size, "gives no finite design effect", "an ordinary size")
    return effect
