"""The design of a simulation: which trials come in, in which order, and when the team looks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.participants import information_per_participant
from treering.terms import Measure

#: Measures whose counts can be drawn.
COUNTED = (Measure.RISK_RATIO, Measure.ODDS_RATIO)


@dataclass(frozen=True, kw_only=True)
class BinaryTrials:
    """Trials whose counts are drawn, so that sparse events and empty cells are in the simulation.

    Parameters
    ----------
    intervention_total, comparator_total : tuple of int
        People in each arm of each trial.
    comparator_risk : float
        Risk in the comparator arm, in (0, 1).
    measure : str
        "risk-ratio" or "odds-ratio". A trial with an empty cell that leaves no estimate is left out of
        the pooling, as without a zero-cell correction.

    Raises
    ------
    AnalysisError
        When a figure cannot be used.
    """

    intervention_total: tuple[int, ...]
    comparator_total: tuple[int, ...]
    comparator_risk: float
    measure: str

    def __post_init__(self) -> None:
        """Refuse what cannot be drawn."""
        if self.measure not in COUNTED or not 0.0 < self.comparator_risk < 1.0:
            raise AnalysisError(
                "Counts cannot be drawn for this measure and risk.",
                found=f"{self.measure}, comparator risk {self.comparator_risk}",
                expected=f"{' or '.join(COUNTED)}, comparator risk in (0, 1)",
                next_step="Give the comparator risk as a proportion, or simulate from information.",
            )
        sizes = (*self.intervention_total, *self.comparator_total)
        if len(self.intervention_total) != len(self.comparator_total) or min(sizes, default=0) < 1:
            raise AnalysisError(
                "A simulated trial has an empty or missing arm.",
                found=f"{self.intervention_total} and {self.comparator_total}",
                expected="one person or more in each arm",
                next_step="Give the planned size of each trial, both arms together, from 2 on.",
            )


@dataclass(frozen=True, kw_only=True)
class SimulationDesign:
    """Trials and looks of the simulated reviews.

    Parameters
    ----------
    information : tuple of float
        Information (1/variance on the analysis scale) of each trial, in order of entry.
    looks : tuple of int
        Number of trials in at each look, increasing; the last is the number of trials.
    tau2 : tuple of float
        Between-trial variances to simulate, on the squared analysis scale.
    counts : BinaryTrials, optional
        Draw counts of a binary outcome. The boundary is then still that of the expected information.

    Raises
    ------
    AnalysisError
        When a figure cannot be used.
    """

    information: tuple[float, ...]
    looks: tuple[int, ...] = ()
    tau2: tuple[float, ...] = (0.0,)
    counts: BinaryTrials | None = None

    def __post_init__(self) -> None:
        """Take a look after each trial when no looks are given, and refuse what cannot be simulated."""
        trials = len(self.information)
        object.__setattr__(self, "information", tuple(float(info) for info in self.information))
        object.__setattr__(self, "looks", tuple(self.looks) or tuple(range(1, trials + 1)))
        object.__setattr__(self, "tau2", tuple(float(value) for value in self.tau2))
        usable = np.isfinite(self.information) & (np.array(self.information) > 0.0)
        if trials == 0 or not usable.all():
            raise AnalysisError(
                "The information of a simulated trial cannot be used.",
                found=list(self.information),
                expected="at least one trial, each with information above 0",
                next_step="Give 1/variance of each trial on the analysis scale, or its size and risk.",
            )
        if self.looks[0] < 1 or self.looks[-1] != trials or any(np.diff(self.looks) <= 0):
            raise AnalysisError(
                "The looks do not fit the trials.",
                found=list(self.looks),
                expected=f"increasing numbers of trials from 1 or more to {trials}",
                next_step="Say how many trials are in at each look; the last look has them all.",
            )
        if self.counts is not None and len(self.counts.intervention_total) != trials:
            raise AnalysisError(
                "Counts and information differ in the number of trials.",
                found=f"{len(self.counts.intervention_total)} and {trials}",
                expected="as many as there are trials",
                next_step="Give sizes and information of the same trials.",
            )
        if not self.tau2 or not all(np.isfinite(value) and value >= 0.0 for value in self.tau2):
            raise AnalysisError(
                "A between-trial variance to simulate cannot be used.",
                found=list(self.tau2),
                expected="at least one figure of 0 or more",
                next_step="State the range of tau2 that the protocol allows for, for example 0 and 0.1.",
            )

    @classmethod
    def from_sizes(
        cls,
        participants: Sequence[float],
        *,
        measure: str,
        comparator_risk: float | None = None,
        intervention_risk: float | None = None,
        sd: float | None = None,
        looks: Sequence[int] = (),
        tau2: Sequence[float] = (0.0,),
    ) -> SimulationDesign:
        """Take trial sizes instead of information; for risk and odds ratios the counts are drawn.

        Parameters
        ----------
        participants : sequence of float
            Participants of each trial, both arms, in order of entry.
        measure : str
            As in `information_per_participant`.
        comparator_risk, intervention_risk : float, optional
            Risks for a binary outcome; the intervention's is the comparator's when left out.
        sd : float, optional
            Standard deviation within an arm for a continuous one.
        looks, tau2
            As in the class.

        Returns
        -------
        SimulationDesign
        """
        other = comparator_risk if intervention_risk is None else intervention_risk
        each = information_per_participant(
            measure, comparator_risk=comparator_risk, intervention_risk=other, sd=sd
        )
        information = tuple(float(size) * each for size in participants)
        counts = None
        if measure in COUNTED and comparator_risk is not None:
            half = tuple(int(size) // 2 for size in participants)
            rest = tuple(int(size) - int(size) // 2 for size in participants)
            counts = BinaryTrials(
                intervention_total=half,
                comparator_total=rest,
                comparator_risk=comparator_risk,
                measure=measure,
            )
        return cls(information=information, looks=tuple(looks), tau2=tuple(tau2), counts=counts)

    @property
    def accrued(self) -> FloatArray:
        """Information in at each look."""
        total: FloatArray = np.cumsum(self.information)[np.array(self.looks) - 1]
        return total

    def to_dict(self) -> dict[str, Any]:
        """Return the design as plain JSON values.

        Returns
        -------
        dict
        """
        return {
            "information": list(self.information),
            "looks": list(self.looks),
            "tau2": list(self.tau2),
            "counts": None if self.counts is None else _plain(self.counts),
        }


def _plain(counts: BinaryTrials) -> dict[str, Any]:
    return {n: list(v) if isinstance(v, tuple) else v for n, v in asdict(counts).items()}
