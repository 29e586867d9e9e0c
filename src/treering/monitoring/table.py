"""The calculator behind `treering boundaries`: bounds, spending and required information as typed in."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike

from treering.errors import AnalysisError
from treering.monitoring.boundaries import boundaries
from treering.monitoring.checks import FloatArray, check_power
from treering.monitoring.crossing import crossing_probabilities
from treering.monitoring.futility import futility_boundaries
from treering.monitoring.information import (
    detection_constant,
    minimum_trials,
    required_events,
    required_information,
)
from treering.monitoring.participants import required_participants
from treering.monitoring.spending import PER_TAIL_CONVENTION
from treering.terms import Spending


@dataclass(frozen=True, kw_only=True)
class DetectableEffect:
    """The effect to detect, as typed in; leave out what is not known.

    Parameters
    ----------
    theta : float, optional
        Effect on the analysis scale (log for ratios): gives the required information.
    comparator_risk, relative_reduction, odds_ratio : float, optional
        Binary outcome: gives the required participants.
    difference, sd : float, optional
        Difference in means with its standard deviation, or in risks with `comparator_risk`.
    hazard_ratio : float, optional
        Time to event: gives the required events, and the information when `theta` is left out.
    tau2 : float, optional
        Between-trial variance on the analysis scale: gives the smallest number of trials.
    diversity : float
        D2 in [0, 1).
    """

    theta: float | None = None
    comparator_risk: float | None = None
    relative_reduction: float | None = None
    odds_ratio: float | None = None
    difference: float | None = None
    sd: float | None = None
    hazard_ratio: float | None = None
    tau2: float | None = None
    diversity: float = 0.0


@dataclass(frozen=True)
class BoundaryTable:
    """Bounds of a plan, look by look, with what it requires.

    Attributes
    ----------
    looks : DataFrame
        One row per look: look, fraction, alpha_spent (cumulative), alpha_at_look, z, nominal_p,
        power (cumulative chance to have crossed on the side of the effect to detect, no futility stops),
        futility_z when asked for, and information, participants, events where they are known.
    required : dict of str to float
        drift, and information, participants, events, minimum_trials where the effect gives them; with
        futility also inflation and the inflated figures.
    plan : dict
        alpha, power, sides, spending, parameter and diversity in force.
    convention : str
        How a two-sided plan applies the spending function.
    """

    looks: pd.DataFrame
    required: Mapping[str, float]
    plan: Mapping[str, object]
    convention: str

    def as_dict(self) -> dict[str, object]:
        """Return the table as plain values; an infinite bound or missing figure becomes None."""
        rows = [
            {str(name): _plain(value) for name, value in row.items()}
            for row in self.looks.to_dict(orient="records")
        ]
        required = {name: _plain(value) for name, value in self.required.items()}
        plan = {name: _plain(value) for name, value in self.plan.items()}
        return {"plan": plan, "convention": self.convention, "required": required, "looks": rows}


def boundary_table(
    fractions: ArrayLike | None = None,
    *,
    looks: int | None = None,
    alpha: float = 0.05,
    power: float = 0.9,
    sides: int = 2,
    spending: str = Spending.OBRIEN_FLEMING,
    parameter: float | None = None,
    futility: bool = False,
    effect: DetectableEffect | None = None,
) -> BoundaryTable:
    """Return bounds, spending, nominal P values and required information of a plan.

    Parameters
    ----------
    fractions : array_like, shape (k,), optional
        Information fractions, increasing. Give these or `looks`.
    looks : int, optional
        Number of equally spaced looks up to fraction 1.
    alpha, sides, spending, parameter
        As in `boundaries`.
    power : float
        Chance to detect the effect at the required information, between alpha and 1.
    futility : bool
        Whether to add non-binding futility bounds by beta spending.
    effect : DetectableEffect, optional
        The effect to detect, for the required information, participants, events and trials.

    Returns
    -------
    BoundaryTable

    Raises
    ------
    AnalysisError
        If the looks are not given once or a figure cannot be used.
    """
    t = _looks(fractions, looks)
    check_power(power, alpha)
    plan = boundaries(t, alpha=alpha, sides=sides, spending=spending, parameter=parameter)
    drift = detection_constant(alpha=alpha, power=power, sides=sides)
    columns: dict[str, FloatArray] = {
        "fraction": t,
        "alpha_spent": plan.alpha_spent,
        "alpha_at_look": np.diff(plan.alpha_spent, prepend=0.0),
        "z": plan.z,
        "nominal_p": plan.nominal_p,
    }
    stated = effect or DetectableEffect()
    required = {"drift": drift, **_required(stated, alpha=alpha, power=power, sides=sides)}
    if futility:
        stop = futility_boundaries(
            t, alpha=alpha, beta=1.0 - power, sides=sides, spending=spending, parameter=parameter
        )
        columns["futility_z"] = stop.z
        required.update(_inflated(required, stop.inflation))
    crossing = crossing_probabilities(t, plan.z, lower=-plan.z if sides == 2 else None, drift=drift)
    columns["power"] = np.cumsum(crossing.upper)
    for name in ("information", "participants", "events"):
        if name in required:
            columns[name] = t * required[name]
    table = pd.DataFrame({"look": np.arange(1, t.size + 1), **columns})
    in_force: dict[str, object] = {
        "alpha": alpha,
        "power": power,
        "sides": sides,
        "spending": str(plan.spending),
        "parameter": plan.parameter,
        "diversity": stated.diversity,
    }
    return BoundaryTable(table, required, in_force, PER_TAIL_CONVENTION)


def _looks(fractions: ArrayLike | None, looks: int | None) -> FloatArray:
    """Return the fractions as given, or equally spaced ones."""
    if fractions is not None and looks is None:
        return np.atleast_1d(np.asarray(fractions, dtype=np.float64))
    if fractions is None and looks is not None and looks >= 1:
        return np.arange(1, looks + 1) / looks
    raise AnalysisError(
        "The looks are not stated once.",
        found={"fractions": fractions, "looks": looks},
        expected="either fractions or a number of looks of 1 or more",
        next_step="Give information fractions such as 0.2 0.4 0.6 0.8 1, or a number of equal looks.",
    )


def _required(effect: DetectableEffect, *, alpha: float, power: float, sides: int) -> dict[str, float]:
    """Return what the stated effect requires, as far as it goes."""
    found: dict[str, float] = {}
    theta = effect.theta
    if effect.hazard_ratio is not None:
        found["events"] = required_events(
            effect.hazard_ratio, alpha=alpha, power=power, sides=sides, diversity=effect.diversity
        )
        theta = math.log(effect.hazard_ratio) if theta is None else theta
    if theta is not None:
        found["information"] = required_information(
            theta, alpha=alpha, power=power, sides=sides, diversity=effect.diversity
        )
    if theta is not None and effect.tau2 is not None:
        found["minimum_trials"] = minimum_trials(theta, effect.tau2, alpha=alpha, power=power, sides=sides)
    figures = asdict(effect)
    wanted = ("comparator_risk", "relative_reduction", "odds_ratio", "difference", "sd")
    given = {name: figures[name] for name in wanted if figures[name] is not None}
    if given:
        found["participants"] = required_participants(
            **given, alpha=alpha, power=power, sides=sides, diversity=effect.diversity
        )
    return found


def _inflated(required: Mapping[str, float], inflation: float) -> dict[str, float]:
    """Return the figures that futility looks inflate; the plain ones stay beside them."""
    sizes = {name: required[name] for name in ("information", "participants", "events") if name in required}
    return {"inflation": inflation, **{f"{name}_inflated": inflation * size for name, size in sizes.items()}}


def _plain(value: object) -> object:
    """Return a value that JSON can hold."""
    if isinstance(value, float | np.floating):
        return float(value) if math.isfinite(value) else None
    return int(value) if isinstance(value, np.integer) else value
