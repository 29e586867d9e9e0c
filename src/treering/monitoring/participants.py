"""Information in participants and events: a translation for readers, never what is monitored."""

from __future__ import annotations

import math

from treering.errors import AnalysisError
from treering.monitoring.checks import check_diversity, check_effect, check_positive, check_share
from treering.monitoring.information import detection_constant
from treering.terms import Measure


def intervention_risk(
    comparator_risk: float,
    *,
    relative_reduction: float | None = None,
    odds_ratio: float | None = None,
    difference: float | None = None,
) -> float:
    """Return the risk under the intervention that a comparator risk and one effect imply.

    Parameters
    ----------
    comparator_risk : float
        Risk in the comparator arm, in (0, 1).
    relative_reduction : float, optional
        1 - risk ratio; negative for an increase.
    odds_ratio : float, optional
        Odds ratio.
    difference : float, optional
        Risk under the intervention minus comparator risk.

    Returns
    -------
    float

    Raises
    ------
    AnalysisError
        If not exactly one effect is given, it is no effect, or a risk is not between 0 and 1.
    """
    effects = {"relative_reduction": relative_reduction, "odds_ratio": odds_ratio, "difference": difference}
    given = {name: value for name, value in effects.items() if value is not None}
    if len(given) != 1:
        raise AnalysisError(
            "The effect to detect is not stated once.",
            found=given or "no effect",
            expected=f"exactly one of {', '.join(effects)}",
            next_step="State the effect of the protocol in one way; the others follow from it.",
        )
    check_share(comparator_risk, "comparator risk")
    if relative_reduction is not None:
        check_effect(relative_reduction, "relative reduction")
        risk = comparator_risk * (1.0 - relative_reduction)
    elif odds_ratio is not None:
        check_positive(odds_ratio, "odds ratio")
        check_effect(math.log(odds_ratio), "log odds ratio")
        odds = odds_ratio * comparator_risk / (1.0 - comparator_risk)
        risk = odds / (1.0 + odds)
    else:
        step = _given(difference, "difference")
        check_effect(step, "risk difference")
        risk = comparator_risk + step
    check_share(risk, "risk under the intervention")
    return risk


def required_participants(
    *,
    comparator_risk: float | None = None,
    relative_reduction: float | None = None,
    odds_ratio: float | None = None,
    difference: float | None = None,
    sd: float | None = None,
    alpha: float = 0.05,
    power: float = 0.9,
    sides: int = 2,
    diversity: float = 0.0,
) -> float:
    """Return the participants, both arms of equal size together, that detect an effect with the power.

    Parameters
    ----------
    comparator_risk : float, optional
        Binary outcome: risk in the comparator arm, with one of `relative_reduction`, `odds_ratio` and
        `difference`.
    relative_reduction, odds_ratio : float, optional
        Binary outcome: effect to detect.
    difference : float, optional
        Difference in means (with `sd`) or in risks (with `comparator_risk`).
    sd : float, optional
        Continuous outcome: standard deviation within an arm, in the unit of `difference`.
    alpha, power, sides
        As in `detection_constant`.
    diversity : float
        D2 in [0, 1).

    Returns
    -------
    float
        Total, not rounded: 4 (z + z)^2 p (1 - p) / delta^2 with p the mean of both risks (binary), or
        4 (z + z)^2 sd^2 / difference^2 (continuous), over 1 - D2.

    Raises
    ------
    AnalysisError
        If an input cannot be used or the outcome type is not clear.

    References
    ----------
    Wetterslev, Thorlund, Brok and Gluud 2008, Journal of Clinical Epidemiology 61:64.
    """
    check_diversity(diversity)
    constant = detection_constant(alpha=alpha, power=power, sides=sides)
    if comparator_risk is not None and sd is None:
        risk = intervention_risk(
            comparator_risk,
            relative_reduction=relative_reduction,
            odds_ratio=odds_ratio,
            difference=difference,
        )
        mean = (comparator_risk + risk) / 2.0
        variance, effect = mean * (1.0 - mean), risk - comparator_risk
    else:
        variance, effect = _continuous(comparator_risk, relative_reduction, odds_ratio, difference, sd)
    return 4.0 * constant**2 * variance / effect**2 / (1.0 - diversity)


_RISK_MEASURES = (Measure.RISK_RATIO, Measure.ODDS_RATIO, Measure.RISK_DIFFERENCE)


def information_per_participant(
    measure: str,
    *,
    comparator_risk: float | None = None,
    intervention_risk: float | None = None,
    sd: float | None = None,
    intervention_share: float = 0.5,
) -> float:
    """Return the information that one participant brings, to translate information for readers.

    Parameters
    ----------
    measure : str or Measure
        "risk-ratio", "odds-ratio" or "risk-difference" (with both risks), "mean-difference" (with `sd`)
        or "standardized-mean-difference" (near no effect).
    comparator_risk, intervention_risk : float, optional
        Risks in both arms, in (0, 1).
    sd : float, optional
        Standard deviation within an arm.
    intervention_share : float
        Share of the participants in the intervention arm, in (0, 1).

    Returns
    -------
    float
        1 over the large-sample variance on the analysis scale, per participant. Information divided by
        it is a number of participants.

    Raises
    ------
    AnalysisError
        If a figure is missing or the measure has no such translation.
    """
    check_share(intervention_share, "share of the intervention arm")
    shares = (intervention_share, 1.0 - intervention_share)
    if measure in _RISK_MEASURES:
        risks = (_given(intervention_risk, "intervention_risk"), _given(comparator_risk, "comparator_risk"))
        arms = zip(shares, risks, strict=True)
        return 1.0 / sum(_risk_variance(Measure(measure), risk) / share for share, risk in arms)
    if measure == Measure.MEAN_DIFFERENCE:
        spread = _given(sd, "sd")
        check_positive(spread, "standard deviation within an arm")
        return shares[0] * shares[1] / spread**2
    if measure == Measure.STANDARDIZED_MEAN_DIFFERENCE:
        return shares[0] * shares[1]
    raise AnalysisError(
        "Information on this measure has no translation into participants.",
        found=measure,
        expected=f"{', '.join(_RISK_MEASURES)}, mean-difference or standardized-mean-difference",
        next_step="Translate a hazard ratio into events with events_for_information.",
    )


def events_for_information(information: float, *, intervention_share: float = 0.5) -> float:
    """Return the events that carry this information on a log hazard ratio near no effect.

    Parameters
    ----------
    information : float
        Information, above 0.
    intervention_share : float
        Share of the participants in the intervention arm, in (0, 1).

    Returns
    -------
    float
        Information / (share (1 - share)), not rounded.

    Raises
    ------
    AnalysisError
        If an input cannot be used.

    References
    ----------
    Schoenfeld 1981, Biometrika 68:316.
    """
    check_positive(information, "information")
    check_share(intervention_share, "share of the intervention arm")
    return information / (intervention_share * (1.0 - intervention_share))


def _given(value: float | None, name: str) -> float:
    """Return a figure that must be there."""
    if value is None:
        raise AnalysisError(
            f"The figure {name} is missing.",
            expected=f"{name} for this kind of outcome",
            next_step="Add it to the outcome in the protocol.",
        )
    return float(value)


def _continuous(
    comparator_risk: float | None,
    relative_reduction: float | None,
    odds_ratio: float | None,
    difference: float | None,
    sd: float | None,
) -> tuple[float, float]:
    """Return variance within an arm and difference in means, or refuse a mixture of outcome types."""
    if any(figure is not None for figure in (comparator_risk, relative_reduction, odds_ratio)):
        raise AnalysisError(
            "The figures do not say whether the outcome is binary or continuous.",
            expected="comparator_risk with one effect, or difference with sd",
            next_step="Leave out the figures of the other kind of outcome.",
        )
    spread, effect = _given(sd, "sd"), _given(difference, "difference")
    check_positive(spread, "standard deviation within an arm")
    check_effect(effect, "difference to detect")
    return spread**2, effect


def _risk_variance(measure: Measure, risk: float) -> float:
    """Variance that one participant with this risk contributes on the scale of the measure."""
    check_share(risk, "risk in an arm")
    if measure is Measure.RISK_RATIO:
        return (1.0 - risk) / risk
    if measure is Measure.ODDS_RATIO:
        return 1.0 / (risk * (1.0 - risk))
    return risk * (1.0 - risk)
