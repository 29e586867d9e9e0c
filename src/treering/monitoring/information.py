"""How much information a verdict needs, in statistical information, events and trials.

Information is 1/variance of the common-effect estimate on the analysis scale.
Participants are a translation for readers and stand in `participants`.
"""

from __future__ import annotations

import math

from scipy import special

from treering.errors import AnalysisError
from treering.monitoring.checks import (
    check_alpha,
    check_diversity,
    check_effect,
    check_positive,
    check_power,
    check_share,
    check_sides,
)


def detection_constant(*, alpha: float = 0.05, power: float = 0.9, sides: int = 2) -> float:
    """Return z(1 - alpha/sides) + z(power): the mean of Z that one test needs for the power.

    Parameters
    ----------
    alpha : float
        Error rate, total over both tails when two-sided, in (0, 0.5).
    power : float
        Chance to detect the effect, between alpha and 1.
    sides : {1, 2}
        Sides of the test.

    Returns
    -------
    float
        3.2415 for alpha 0.05 two-sided and power 0.9.

    Raises
    ------
    AnalysisError
        If alpha, power or sides cannot be used.
    """
    check_alpha(alpha)
    check_sides(sides)
    check_power(power, alpha)
    return float(special.ndtri(power) - special.ndtri(alpha / sides))


def required_information(
    theta: float, *, alpha: float = 0.05, power: float = 0.9, sides: int = 2, diversity: float = 0.0
) -> float:
    """Return the information at which a test detects `theta` with the power.

    Parameters
    ----------
    theta : float
        Effect to detect on the analysis scale (log for ratios), not 0.
    alpha, power, sides
        As in `detection_constant`.
    diversity : float
        D2 in [0, 1), fixed by protocol.

    Returns
    -------
    float
        ((z(1 - alpha/sides) + z(power)) / theta)^2 / (1 - D2), in units of 1/theta^2. For the size
        inflated by futility looks multiply by `futility_boundaries(...).inflation`.

    Raises
    ------
    AnalysisError
        If an input cannot be used.

    References
    ----------
    Wetterslev, Thorlund, Brok and Gluud 2009, BMC Medical Research Methodology 9:86.
    """
    check_effect(theta)
    check_diversity(diversity)
    constant = detection_constant(alpha=alpha, power=power, sides=sides)
    return float((constant / theta) ** 2 / (1.0 - diversity))


def required_events(
    hazard_ratio: float,
    *,
    alpha: float = 0.05,
    power: float = 0.9,
    sides: int = 2,
    diversity: float = 0.0,
    intervention_share: float = 0.5,
) -> float:
    """Return the events, both arms together, that detect a hazard ratio with the power.

    Parameters
    ----------
    hazard_ratio : float
        Hazard ratio to detect, above 0 and not 1.
    alpha, power, sides
        As in `detection_constant`.
    diversity : float
        D2 in [0, 1).
    intervention_share : float
        Share of the participants in the intervention arm, in (0, 1).

    Returns
    -------
    float
        (z + z)^2 / (share (1 - share) log(HR)^2) / (1 - D2), not rounded.

    Raises
    ------
    AnalysisError
        If an input cannot be used.

    References
    ----------
    Schoenfeld 1981, Biometrika 68:316.
    """
    check_positive(hazard_ratio, "hazard ratio")
    check_share(intervention_share, "share of the intervention arm")
    needed = required_information(
        math.log(hazard_ratio), alpha=alpha, power=power, sides=sides, diversity=diversity
    )
    return needed / (intervention_share * (1.0 - intervention_share))


def minimum_trials(
    theta: float,
    tau2: float,
    *,
    alpha: float = 0.05,
    power: float = 0.9,
    sides: int = 2,
    trial_variance: float = 0.0,
) -> int:
    """Return the smallest number of trials with which the power can be reached at all.

    Under random effects the variance of the pooled estimate of k trials is never below tau2/k, however
    large the trials are; no number of participants replaces the trials.

    Parameters
    ----------
    theta : float
        Effect to detect on the analysis scale, not 0.
    tau2 : float
        Between-trial variance, 0 or more.
    alpha, power, sides
        As in `detection_constant`.
    trial_variance : float
        Variance within each trial; 0, the default, gives the floor for trials of any size.

    Returns
    -------
    int
        At least 1: the smallest k with (tau2 + trial_variance)/k below (theta / (z + z))^2; when the
        trials have a size of their own, at or below it.

    Raises
    ------
    AnalysisError
        If an input cannot be used.

    References
    ----------
    Kulinskaya and Wood 2014, Research Synthesis Methods 5:297.
    """
    check_effect(theta)
    for value, name in ((tau2, "between-trial variance tau2"), (trial_variance, "variance within a trial")):
        if not (math.isfinite(value) and value >= 0.0):
            raise AnalysisError(
                f"The {name} is below 0 or not a number.",
                found=value,
                expected="0 or more, on the analysis scale squared",
                next_step="Take it from the pooled result or from the protocol.",
            )
    constant = detection_constant(alpha=alpha, power=power, sides=sides)
    ratio = (tau2 + trial_variance) * (constant / theta) ** 2
    whole = math.ceil(ratio)
    attained = trial_variance > 0.0 or ratio < whole
    return max(1, whole if attained else whole + 1)
