"""Parts of the table analysis without a model of their own: counts pooled, trials left out, small studies."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.analysis_input import Inputs, Ledger
from treering.pooling.influence import cumulative
from treering.pooling.mantel_haenszel import pool_mantel_haenszel
from treering.pooling.peto import pool_peto
from treering.pooling.result import PooledEffect
from treering.pooling.small_study import (
    FEW_TRIALS,
    RankTest,
    RegressionTest,
    egger,
    harbord,
    peters,
    rank_correlation,
)
from treering.pooling.trim_fill import TrimAndFill, trim_and_fill
from treering.terms import Measure

_ORDERS = ("date", "year")
_MANTEL_HAENSZEL = frozenset({Measure.RISK_RATIO, Measure.ODDS_RATIO, Measure.RISK_DIFFERENCE})
_ODDS = frozenset({Measure.ODDS_RATIO, Measure.PETO_ODDS_RATIO})


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


@dataclass(frozen=True, slots=True)
class SmallStudy:
    """Tests for small-study effects; those that do not fit the measure are None.

    ``forced`` is true when there are fewer than ten trials and the tests were asked for all the same.
    """

    k: int
    forced: bool
    egger: RegressionTest | None
    peters: RegressionTest | None
    harbord: RegressionTest | None
    rank_correlation: RankTest | None


def mantel_haenszel(inputs: Inputs, ledger: Ledger) -> PooledEffect | None:
    """Mantel-Haenszel pooled effect from the counts, or None with the reason in the ledger.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.
    ledger : Ledger
        Where reasons are kept.

    Returns
    -------
    PooledEffect or None
    """
    reason = inputs.why_no_counts
    if not reason and inputs.measure not in _MANTEL_HAENSZEL:
        reason = f"there is no Mantel-Haenszel method for {inputs.measure}"
    return ledger.attempt(
        "mantel_haenszel",
        reason,
        lambda: pool_mantel_haenszel(
            inputs.table, inputs.measure, correction=inputs.plan.correction, amount=inputs.plan.amount
        ),
    )


def peto(inputs: Inputs, ledger: Ledger) -> PooledEffect | None:
    """Peto odds ratio from the counts, whatever the measure, or None with the reason in the ledger.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.
    ledger : Ledger
        Where reasons are kept.

    Returns
    -------
    PooledEffect or None
    """
    return ledger.attempt("peto", inputs.why_no_counts, lambda: pool_peto(inputs.table))


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
    ranks = None
    if column is not None:
        gaps = used[column].isna().to_numpy()
        if gaps.any():
            raise AnalysisError(f"{column}: is missing.", trial=str(used.index[int(np.argmax(gaps))]))
        # ranks, because dates are no floats
        ranks = used[column].rank(method="dense").to_numpy(dtype=float)
    steps = cumulative(*inputs.numbers, order=ranks, **inputs.plan.random_effects)
    return Cumulative(column or "rows of the table", steps)


def small_study_parts(inputs: Inputs, ledger: Ledger) -> tuple[SmallStudy | None, TrimAndFill | None]:
    """Small-study tests and trim and fill, with ten trials or more unless forced.

    Parameters
    ----------
    inputs : Inputs
        The table and its effects.
    ledger : Ledger
        Where reasons are kept.

    Returns
    -------
    tuple
        Tests; trim and fill in the common-effect model. None where not done.
    """
    k = len(inputs.sizes)
    reason = ""
    if k < FEW_TRIALS and not inputs.plan.force_small_study:
        reason = f"{k} trials; such tests are read with {FEW_TRIALS} or more only"
    tests = ledger.attempt("small_study", reason, lambda: _tests(inputs, ledger))
    filled = ledger.attempt(
        "trim_and_fill",
        reason,
        lambda: trim_and_fill(*inputs.numbers, level=inputs.plan.level),
    )
    return tests, filled


def _tests(inputs: Inputs, ledger: Ledger) -> SmallStudy:
    """All tests that fit the measure."""
    y, v = inputs.numbers
    counts = inputs.why_no_counts
    odds = counts or ("" if inputs.measure in _ODDS else "made for odds ratios")
    k = len(inputs.sizes)
    return SmallStudy(
        k=k,
        forced=k < FEW_TRIALS,
        egger=ledger.attempt("small_study egger", "", lambda: egger(y, v)),
        peters=ledger.attempt("small_study peters", odds, lambda: peters(inputs.used)),
        harbord=ledger.attempt("small_study harbord", odds, lambda: harbord(inputs.used)),
        rank_correlation=ledger.attempt("small_study rank_correlation", "", lambda: rank_correlation(y, v)),
    )
