"""What the table analysis works on: one checked table, its effects and the options."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar

import numpy as np
import pandas as pd

from treering.effects import LeftOut, usable
from treering.effects.zero_cells import COUNTS
from treering.errors import AnalysisError
from treering.pooling.checks import check_level, choose
from treering.pooling.priors import TauPrior
from treering.terms import RATIO_MEASURES, Better, Measure

BINARY = frozenset(
    {
        Measure.RISK_RATIO,
        Measure.ODDS_RATIO,
        Measure.RISK_DIFFERENCE,
        Measure.PETO_ODDS_RATIO,
        Measure.ARCSINE_DIFFERENCE,
    }
)
#: Below this share of people with an event an outcome is called rare here (common practice, no source).
RARE = 0.05

Result = TypeVar("Result")


@dataclass(frozen=True, slots=True)
class Plan:
    """Options of a table analysis; see ``analyse_table``."""

    tau2: str
    interval: str
    level: float
    prediction_df: str
    correction: str
    amount: float
    subgroup: str
    between_variance: str
    covariates: tuple[str, ...]
    order: str | None
    comparator_risk: tuple[float, ...]
    prior: TauPrior | str | None
    better: str | None
    mid: float | None
    one_stage: str
    force_small_study: bool

    @property
    def random_effects(self) -> dict[str, Any]:
        """Options of the planned random-effects analysis, for everything that pools again."""
        return {
            "tau2": self.tau2,
            "interval": self.interval,
            "level": self.level,
            "prediction_df": self.prediction_df,
        }


@dataclass(frozen=True, slots=True)
class Inputs:
    """A table with its effects.

    Attributes
    ----------
    table : DataFrame
        All rows, indexed by trial.
    measure : Measure
        The measure.
    sizes : DataFrame
        ``estimate`` and ``variance`` of the usable trials.
    plan : Plan
        Options.
    """

    table: pd.DataFrame
    measure: Measure
    sizes: pd.DataFrame
    plan: Plan

    @property
    def ratio(self) -> bool:
        """Whether the analysis scale is the log."""
        return self.measure in RATIO_MEASURES

    @property
    def left_out(self) -> tuple[LeftOut, ...]:
        """Trials without a usable effect, with the reason."""
        return tuple(self.sizes.attrs["left_out"])

    @property
    def used(self) -> pd.DataFrame:
        """Rows of the usable trials."""
        return self.table.loc[self.sizes.index]

    @property
    def why_no_counts(self) -> str:
        """Reason why methods on counts cannot be used, empty when they can."""
        if self.measure not in BINARY:
            return f"for binary outcomes only, not for {self.measure}"
        missing = [name for name in COUNTS if name not in self.table.columns]
        if missing:
            return f"the table has no column {missing[0]}"
        gaps = self.table[list(COUNTS)].isna().any(axis=1).to_numpy()
        if gaps.any():
            return f"no counts for {', '.join(str(t) for t in self.table.index[gaps])}"
        return ""

    @property
    def numbers(self) -> tuple[pd.Series, pd.Series]:
        """Estimates and variances of the usable trials."""
        return self.sizes["estimate"], self.sizes["variance"]

    @property
    def rare(self) -> bool:
        """Whether a trial has an arm without events, or the summed risk of an arm is below ``RARE``."""
        events = self.table[["intervention_events", "comparator_events"]].to_numpy(dtype=float)
        totals = self.table[["intervention_total", "comparator_total"]].to_numpy(dtype=float)
        return bool((events == 0).any() or (events.sum(axis=0) / totals.sum(axis=0) < RARE).any())


class Ledger:
    """Keeps the reason of each part of the analysis that could not be done."""

    def __init__(self) -> None:
        self.not_done: dict[str, str] = {}

    def attempt(self, part: str, reason: str, compute: Callable[[], Result]) -> Result | None:
        """Compute one part, or note why it is not there.

        Parameters
        ----------
        part : str
            Name of the part.
        reason : str
            Why it is not to be computed; empty to compute it.
        compute : callable
            The computation.

        Returns
        -------
        object or None
            The result; None with the reason noted in ``not_done``.
        """
        if reason:
            self.not_done[part] = reason
            return None
        try:
            return compute()
        except AnalysisError as error:
            self.not_done[part] = str(error)
            return None


def check_words(plan: Plan) -> None:
    """Refuse options that no part would understand, before any part is computed.

    Parameters
    ----------
    plan : Plan
        Options.

    Raises
    ------
    AnalysisError
        An unknown word, or a comparator risk that is none.
    """
    if plan.better is not None:
        choose(Better, plan.better, "better")
    known = {"one_stage": ("rare", "always", "never"), "between_variance": ("separate", "common")}
    for field, words in known.items():
        found = getattr(plan, field)
        if found not in words:
            raise AnalysisError(
                f"{field} is not a known word.", found=found, expected=f"one of {', '.join(words)}"
            )
    for risk in plan.comparator_risk:
        if not 0 < risk < 1:
            raise AnalysisError("comparator_risk must lie strictly between 0 and 1.", found=risk)


def prepare(table: pd.DataFrame, measure: str, plan: Plan) -> Inputs:
    """Index the table by trial and compute the effects.

    Parameters
    ----------
    table : DataFrame
        One row per trial, named by column ``trial`` or the index.
    measure : str
        A ``treering.terms.Measure``.
    plan : Plan
        Options.

    Returns
    -------
    Inputs

    Raises
    ------
    AnalysisError
        Faulty numbers, a trial without a name, or a trial that stands in two rows.
    """
    check_level(plan.level)
    frame = pd.DataFrame(table).copy()
    if "trial" in frame.columns:
        unnamed = frame["trial"].isna() | (frame["trial"].astype(str).str.strip() == "")
        if unnamed.any():
            raise AnalysisError("trial: the name is missing.", found=f"row {int(np.argmax(unnamed)) + 1}")
        frame = frame.set_index(frame["trial"].astype(str).str.strip()).drop(columns="trial")
    elif isinstance(frame.index, pd.RangeIndex):
        frame.index = pd.Index([str(i + 1) for i in range(len(frame))])
    frame.index = pd.Index([str(name) for name in frame.index], name="trial")
    doubled = frame.index[frame.index.duplicated()]
    if len(doubled):
        raise AnalysisError(
            "The trial stands in more than one row.",
            trial=str(doubled[0]),
            next_step="Combine its arms or split the shared comparator, so that nobody is counted twice.",
        )
    sizes = usable(frame, measure, correction=plan.correction, amount=plan.amount)
    return Inputs(frame, Measure(measure), sizes, plan)


def tuple_of(value: float | Sequence[float] | None) -> tuple[float, ...]:
    """One number, several or none, as a tuple.

    Parameters
    ----------
    value : float, sequence of float or None
        What was given.

    Returns
    -------
    tuple of float
    """
    if value is None:
        return ()
    return (float(value),) if isinstance(value, int | float) else tuple(float(v) for v in value)
