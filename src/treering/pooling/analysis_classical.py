"""Parts of the table analysis that leave trials out, or add them up one by one."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.analysis_input import Inputs
from treering.pooling.inverse_variance import pool_many

_ORDERS = ("date", "year")
_SHOWN = ["k", "estimate", "standard_error", "ci_low", "ci_high", "p", "tau2", "i2"]


@dataclass(frozen=True, slots=True)
class Cumulative:
    """The random-effects result as trials are added.

    Attributes
    ----------
    order : str
        Column that gave the order, or "rows of the table".
    steps : DataFrame, one row per trial
        Result with this trial and all before it, indexed by the trial added.
    """

    order: str
    steps: pd.DataFrame


def _pooled_sets(inputs: Inputs, members: np.ndarray, labels: pd.Index) -> pd.DataFrame:
    """Pool many sets of trials at once; row i of the boolean matrix ``members`` says who is in set i."""
    plan = inputs.plan
    y, v = inputs.sizes["estimate"].to_numpy(), inputs.sizes["variance"].to_numpy()
    group, trial = np.nonzero(members)
    pooled = pool_many(
        y[trial],
        v[trial],
        group,
        tau2=plan.tau2,
        interval=plan.interval,
        level=plan.level,
        prediction_df=plan.prediction_df,
    )
    return pooled[_SHOWN].set_axis(labels.rename("trial"))


def without_each(inputs: Inputs) -> pd.DataFrame:
    """Pool all trials but one, for each trial in turn.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects, two trials or more.

    Returns
    -------
    DataFrame, k rows
        Random-effects result without the trial of the index.
    """
    k = len(inputs.sizes)
    return _pooled_sets(inputs, ~np.eye(k, dtype=bool), inputs.sizes.index)


def added_up(inputs: Inputs) -> Cumulative:
    """Pool the first trial, the first two, and so on.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.

    Returns
    -------
    Cumulative

    Raises
    ------
    AnalysisError
        When the column to order by is missing or has a gap.
    """
    used, column = inputs.used, inputs.plan.order
    if column is None:
        column = next((name for name in _ORDERS if name in used.columns), None)
    elif column not in used.columns:
        raise AnalysisError("The table lacks the column to order by.", found=column)
    places = np.arange(len(used))
    if column is not None:
        gaps = used[column].isna().to_numpy()
        if gaps.any():
            raise AnalysisError(f"{column}: is missing.", trial=str(used.index[int(np.argmax(gaps))]))
        places = np.argsort(used[column].to_numpy(), kind="stable")
    members = np.zeros((len(places), len(places)), dtype=bool)
    for step in range(len(places)):
        members[step, places[: step + 1]] = True
    return Cumulative(column or "rows of the table", _pooled_sets(inputs, members, used.index[places]))
