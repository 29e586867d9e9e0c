"""Hazard ratios from what reports of time-to-event outcomes give.

Parmar, Torri and Stewart 1998 (Stat Med 17:2815) and Tierney, Stewart, Ghersi, Burdett and Sydes 2007
(Trials 8:16): the log-rank observed minus expected events O - E with variance V give the log hazard ratio
(O - E)/V with variance 1/V.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np
from scipy.stats import norm

from treering.effects import columns, reported
from treering.effects.rows import Effects, FloatArray, Rows, refuse


def from_observed_minus_expected(rows: Rows) -> Effects:
    """Log hazard ratio (O - E)/V, variance 1/V (Parmar et al. 1998, equations 1 and 2).

    Parameters
    ----------
    rows : Rows, k trials
        With ``observed_minus_expected`` and ``variance_oe``, in events.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    information = rows["variance_oe"]
    refuse(
        information <= 0,
        rows.labels,
        "variance_oe",
        information,
        "is not above zero",
        "a variance above zero",
    )
    return Effects.plain(rows["observed_minus_expected"] / information, 1 / information)


def log_rank_variance(intervention_events: FloatArray, comparator_events: FloatArray) -> FloatArray:
    """Approximate log-rank variance from the events of each arm.

    V = O1 O2 / (O1 + O2), exact under no effect with equal numbers at risk in proportion (Parmar et al. 1998;
    Tierney et al. 2007, text of the P-value methods).

    Parameters
    ----------
    intervention_events, comparator_events : array_like
        Events of each arm, above zero.

    Returns
    -------
    ndarray
        V, in events.

    Raises
    ------
    AnalysisError
        If events are not finite and above zero.
    """
    first = columns.figures("intervention_events", intervention_events)
    second = columns.figures("comparator_events", comparator_events)
    return np.asarray(first * (second / (first + second)))


def log_rank_variance_by_allocation(
    events: FloatArray, intervention_total: FloatArray, comparator_total: FloatArray
) -> FloatArray:
    """Approximate log-rank variance from all events and the numbers randomised.

    V = O R1 R2 / (R1 + R2)^2, a quarter of the events with equal arms (Parmar et al. 1998; Tierney et al.
    2007).

    Parameters
    ----------
    events : array_like
        Events of both arms together.
    intervention_total, comparator_total : array_like
        Participants randomised.

    Returns
    -------
    ndarray
        V, in events.

    Raises
    ------
    AnalysisError
        If a number is not finite and above zero.
    """
    r1 = columns.figures("intervention_total", intervention_total)
    r2 = columns.figures("comparator_total", comparator_total)
    return np.asarray(columns.figures("events", events) * (r1 / (r1 + r2)) * (r2 / (r1 + r2)))


def from_log_rank_p(rows: Rows) -> Effects:
    r"""Log hazard ratio from a two-sided log-rank P value, the events of each arm and the direction.

    :math:`O - E = \pm z_{1-p/2} \sqrt{V}`, so that the log hazard ratio is :math:`\pm z/\sqrt{V}` (Parmar et
    al. 1998; Tierney et al. 2007). The sign is minus where ``lower_hazard`` says "intervention".

    Parameters
    ----------
    rows : Rows, k trials
        With ``p_value``, events of both arms above zero, and ``lower_hazard`` as a sign.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    reported.probability(rows)
    for arm in ("intervention", "comparator"):
        events = rows[f"{arm}_events"]
        refuse(events <= 0, rows.labels, f"{arm}_events", events, "is not above zero", "events in both arms")
    information = log_rank_variance(rows["intervention_events"], rows["comparator_events"])
    sign = np.where(rows["lower_hazard"] < 0, -1.0, 1.0)
    estimate = sign * norm.isf(rows["p_value"] / 2) / np.sqrt(information)
    return Effects.plain(estimate, 1 / information)
