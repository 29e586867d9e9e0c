"""Peto's one-step odds ratio: observed minus expected events and their hypergeometric variance."""

from __future__ import annotations

import numpy as np
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.counts import common_effect, deviations, silent_trials
from treering.pooling.result import PooledEffect


def pool_peto(table: pd.DataFrame) -> PooledEffect:
    """Pool two-by-two tables by Peto's method.

    Parameters
    ----------
    table : DataFrame, k rows
        ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    PooledEffect
        Common log odds ratio sum (O - E) / sum V with variance 1 / sum V; Q = sum (O - E)^2 / V -
        (sum (O - E))^2 / sum V. Trials without events, or with nothing but events, have weight zero.

    Raises
    ------
    AnalysisError
        A count that cannot be right, or no trial that compares anything.

    References
    ----------
    Yusuf S et al. (1985), Prog Cardiovasc Dis 27:335. Cited from memory.
    """
    deviation, variance = deviations(table)
    informative = variance > 0.0
    if not informative.any():
        raise AnalysisError("No trial has both events and non-events: there is no odds ratio to pool.")
    o, v = deviation[informative], variance[informative]
    q = float(((o - v * o.sum() / v.sum()) ** 2 / v).sum())
    return common_effect(
        estimate=float(o.sum() / v.sum()),
        variance=float(1.0 / v.sum()),
        q=q if o.size > 1 else 0.0,
        q_df=float(o.size - 1),
        weights=np.where(informative, variance, 0.0),
        method="peto",
        remarks=silent_trials(informative, "no event, or nothing but events"),
    )
