"""From verified results to effects and pooled effects, by the protocol's plan for one outcome."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from treering.effects import effect_sizes
from treering.pooling import PooledEffect, pool, pool_mantel_haenszel
from treering.protocol import Outcome, Pooling
from treering.synthesis.arms import COUNTED_TWICE
from treering.synthesis.clusters import effective_values, with_clusters
from treering.synthesis.trials import TrialRow
from treering.terms import PoolingModel

Floats = NDArray[np.float64]

#: Standings of a trial that gives this synthesis no number at all.
UNUSABLE = frozenset({"no usable result", COUNTED_TWICE})


@dataclass(frozen=True)
class Estimated:
    """The trials of one outcome with their effects on the analysis scale.

    Parameters
    ----------
    rows : tuple of TrialRow
        Every trial with a verified result, those left out included and marked.
    effects : DataFrame
        ``estimate`` and ``variance`` by trial id; NaN where a trial gives no effect.
    """

    rows: tuple[TrialRow, ...]
    effects: pd.DataFrame

    @property
    def main(self) -> tuple[TrialRow, ...]:
        """The trials in the main analysis, in order."""
        return tuple(row for row in self.rows if row.left_out is None)

    def numbers(self, rows: Sequence[TrialRow]) -> tuple[Floats, Floats]:
        """Return estimates and variances of `rows`, both of shape (k,)."""
        part = self.effects.loc[[row.trial for row in rows]]
        return part["estimate"].to_numpy(float), part["variance"].to_numpy(float)


def estimate_trials(rows: Sequence[TrialRow], outcome: Outcome) -> Estimated:
    """Compute each trial's effect and mark those that give none.

    Parameters
    ----------
    rows : sequence of TrialRow
        Verified results of one outcome.
    outcome : Outcome
        Gives measure and zero-cell rule.

    Returns
    -------
    Estimated

    Raises
    ------
    AnalysisError
        When a verified number cannot be analysed; names trial and field.
    """
    usable = [row for row in rows if row.status not in UNUSABLE]
    if not usable:
        return Estimated(tuple(rows), pd.DataFrame({"estimate": [], "variance": []}, dtype=float))
    table = values_table(usable)
    effects = effect_sizes(
        table,
        outcome.measure,
        correction=outcome.pooling.correction,
        amount=outcome.pooling.correction_amount,
    )
    reasons = {row.trial: row.reason for row in effects.attrs.get("left_out", ())}
    marked = [
        replace(row, left_out=reasons[row.trial]) if row.left_out is None and row.trial in reasons else row
        for row in with_clusters(rows, table)
    ]
    return Estimated(tuple(marked), effects)


def values_table(rows: Sequence[TrialRow]) -> pd.DataFrame:
    """Return the verified numbers of `rows`, one row per trial, ready for effects; see `effective_values`."""
    return effective_values({row.trial: row.values for row in rows})


def pool_planned(estimated: Estimated, rows: Sequence[TrialRow], outcome: Outcome) -> PooledEffect | None:
    """Pool `rows` by the protocol's plan; None when there is no trial to pool.

    Parameters
    ----------
    estimated : Estimated
        Effects of the outcome.
    rows : sequence of TrialRow
        The trials to pool.
    outcome : Outcome
        Gives the plan.

    Returns
    -------
    PooledEffect or None
    """
    if not rows:
        return None
    plan = outcome.pooling
    if plan.method == "mantel-haenszel":
        return pool_mantel_haenszel(
            values_table(rows), outcome.measure, correction=plan.correction, amount=plan.correction_amount
        )
    return pool_by(plan, *estimated.numbers(rows))


def pool_by(plan: Pooling, estimates: Floats, variances: Floats, *, model: str | None = None) -> PooledEffect:
    """Inverse-variance pooling under the options of `plan`; `model` overrides the plan's."""
    chosen = PoolingModel(model or plan.model)
    common = chosen is PoolingModel.COMMON
    return pool(
        estimates,
        variances,
        model=chosen,
        tau2=plan.tau2,
        interval="wald" if common or len(estimates) < 2 else plan.interval,
        level=plan.level,
        prediction_df=plan.prediction_df,
    )


def method_words(outcome: Outcome) -> str:
    """Say in words how the headline estimate of `outcome` is made."""
    plan = outcome.pooling
    if plan.method == "mantel-haenszel":
        return "Mantel-Haenszel common effect"
    if plan.model is PoolingModel.COMMON:
        return "common effect, inverse variance"
    names = {
        "dersimonian-laird": "DerSimonian-Laird",
        "paule-mandel": "Paule-Mandel",
        "reml": "REML",
        "ml": "maximum likelihood",
        "hedges": "Hedges",
        "sidik-jonkman": "Sidik-Jonkman",
        "hunter-schmidt": "Hunter-Schmidt",
    }
    intervals = {
        "wald": "Wald interval",
        "knapp-hartung": "Knapp-Hartung interval",
        "modified-knapp-hartung": "modified Knapp-Hartung interval (variance never below the ordinary one)",
    }
    return f"random effects, tau2 by {names[plan.tau2.value]}, {intervals[plan.interval.value]}"


def repool_rows(outcome: Outcome, rows: Sequence[Mapping[str, Any]]) -> float | None:
    """Pool trial rows of an analysis body by the plan and return the estimate on the analysis scale.

    Parameters
    ----------
    outcome : Outcome
        The outcome with its plan.
    rows : sequence of mapping
        Rows of ``trials`` of an analysis body.

    Returns
    -------
    float or None
        None when there is no row to pool.
    """
    usable = [row for row in rows if row["estimate"] is not None]
    if not usable:
        return None
    if outcome.pooling.method == "mantel-haenszel":
        table = effective_values({row["trial"]: row["values"] for row in usable})
        plan = outcome.pooling
        return pool_mantel_haenszel(
            table, outcome.measure, correction=plan.correction, amount=plan.correction_amount
        ).estimate
    estimates = np.array([row["estimate"] for row in usable], dtype=float)
    errors = np.array([row["standard_error"] for row in usable], dtype=float)
    return pool_by(outcome.pooling, estimates, errors**2).estimate
