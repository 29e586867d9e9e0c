"""Words for an estimate, from a fixed list tied to its interval; no sentence is written by hand elsewhere.

An interval that covers the no-effect value is "compatible with no effect", never "no effect". Sizes are read
against the smallest difference that matters, which the protocol names (MECIR C72: interpret from the estimate
and its interval, not from a significance label).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.report.numbers import NOT_ESTIMABLE, effect, interval, natural, number, plural
from treering.terms import Better, Measure

Body = Mapping[str, Any]

INVENTED = (
    "Invented demonstration: the question, the people, every trial and every number on this page are made "
    "up. Nothing here says anything about care."
)
FOOTER = (
    "This report informs a panel. It makes no treatment recommendation, and it defers to local rules and to "
    "licensed clinicians. A statistician should read the analyses and the monitoring before anyone relies on "
    "them."
)
HINDSIGHT = (
    "Hindsight: the curve redrawn as if every trial had been known on its publication date. Nobody saw these "
    "values then, and no alpha was spent on them. The ledger of looks is what happened."
)
NO_TRIALS = "No trial gives a usable result for this outcome yet, so nothing is estimated."

_MEASURES = {
    Measure.PETO_ODDS_RATIO: "Peto odds ratio",
    Measure.STANDARDIZED_MEAN_DIFFERENCE: "standardized mean difference",
    Measure.GENERIC: "effect",
}
_MORE_OF = {
    Measure.RATE_RATIO: ("lower rate", "higher rate"),
    Measure.HAZARD_RATIO: ("lower hazard", "higher hazard"),
    Measure.RISK_RATIO: ("less often", "more often"),
    Measure.ODDS_RATIO: ("less often", "more often"),
    Measure.PETO_ODDS_RATIO: ("less often", "more often"),
    Measure.RISK_DIFFERENCE: ("less often", "more often"),
    Measure.ARCSINE_DIFFERENCE: ("less often", "more often"),
}


def measure_words(measure: str) -> str:
    """Return the name of an effect measure as readers write it."""
    return _MEASURES.get(Measure(measure), measure.replace("-", " "))


def no_effect(scale: str) -> str:
    """Return the value that stands for no effect on the natural scale."""
    return "1" if scale == "log" else "0"


def explain_interval(level: float) -> str:
    """Say what an interval is, and what it is not.

    Parameters
    ----------
    level : float
        Confidence level.

    Returns
    -------
    str
    """
    share = number(100 * level, 0 if round(100 * level, 6).is_integer() else 1)
    return (
        f"A {share}% interval comes from a procedure that covers the true value in {share}% of repetitions "
        "when its assumptions hold; it does not say how probable it is that the true value lies in this one "
        "interval."
    )


def directions(measure: str, intervention: str) -> tuple[str, str]:
    """Say what effects below and above the no-effect value mean.

    Parameters
    ----------
    measure : str
        Effect measure.
    intervention : str
        Name of the intervention in the protocol.

    Returns
    -------
    tuple of str
        For example "less often with warming", "more often with warming".
    """
    low, high = _MORE_OF.get(Measure(measure), ("lower", "higher"))
    return f"{low} with {intervention}", f"{high} with {intervention}"


def side_words(body: Body, intervention: str) -> tuple[str, str]:
    """Return both directions with the side that is good for patients marked."""
    low, high = directions(body["measure"], intervention)
    good_low = body["better"] == Better.LOWER
    return f"{low} ({'better' if good_low else 'worse'})", f"{high} ({'worse' if good_low else 'better'})"


def headline(body: Body, level: float) -> str:
    """Give the ordinary pooled estimate with its interval in one sentence.

    Parameters
    ----------
    body : mapping
        Analysis body.
    level : float
        Confidence level of the protocol.

    Returns
    -------
    str
    """
    pooled = body.get("pooled")
    if not pooled or pooled.get("estimate") is None:
        return NO_TRIALS
    scale, measure = body["scale"], body["measure"]
    unit = f" {body['unit']}" if body.get("unit") else ""
    value = effect(pooled["estimate"], scale, measure)
    ends = interval(pooled["ci_low"], pooled["ci_high"], scale, measure)
    name = measure_words(measure)
    return f"{name[0].upper()}{name[1:]} {value}{unit} ({number(100 * level, 0)}% interval {ends})"


def reading(body: Body) -> str:
    """Read the interval against no effect and the smallest difference that matters.

    Parameters
    ----------
    body : mapping
        Analysis body.

    Returns
    -------
    str
        One of a fixed list of sentences.
    """
    pooled = body.get("pooled")
    if not pooled or pooled.get("ci_low") is None or pooled.get("ci_high") is None:
        return f"The interval is {NOT_ESTIMABLE}: no reading is given."
    low, high = pooled["ci_low"], pooled["ci_high"]
    size = abs(body["mid"])
    if low <= 0 <= high:
        return _covers_no_effect(body, low, high, size)
    side = "lower" if high < 0 else "higher"
    good = "good for patients" if side == body["better"] else "bad for patients"
    nearest, farthest = sorted((abs(low), abs(high)))
    return f"The whole interval lies on the side that is {good}. {_size_words(nearest, farthest, size)}"


def _covers_no_effect(body: Body, low: float, high: float, size: float) -> str:
    below, above = low <= -size, high >= size
    if below and above:
        more = "with differences that matter in both directions"
    elif below or above:
        better = "lower" if below else "higher"
        more = f"with a difference that matters for the {'better' if better == body['better'] else 'worse'}"
    else:
        return (
            "Compatible with no effect; every value in the interval is smaller than the smallest difference "
            "that matters."
        )
    return f"Compatible with no effect, and {more}."


def _size_words(nearest: float, farthest: float, size: float) -> str:
    if nearest >= size:
        return "Every value in it is at least the smallest difference that matters."
    if farthest < size:
        return "Every value in it is smaller than the smallest difference that matters."
    return "It holds differences that matter and smaller ones."


def mid_words(body: Body) -> str:
    """Name the smallest difference that matters in natural numbers."""
    unit = f" {body['unit']}" if body.get("unit") else ""
    scale, measure = body["scale"], body["measure"]
    other = effect(-body["mid"], scale, measure)
    return f"{effect(body['mid'], scale, measure)}{unit} (the same size the other way: {other}{unit})"


def absolute_words(body: Body, intervention: str, comparator: str) -> str | None:
    """Give the absolute effect per so many people, or None when the protocol names no comparator risk.

    Parameters
    ----------
    body : mapping
        Analysis body.
    intervention, comparator : str
        Their names in the protocol.

    Returns
    -------
    str or None
    """
    absolute = body.get("absolute")
    if not absolute:
        return None
    per = number(absolute["per"], 0)
    without = _people(absolute["per"] * absolute["comparator_risk"])
    base = f"With {comparator}, {without} of {per} people by the protocol"
    if absolute.get("difference") is None:
        return f"{base}; the absolute effect is {NOT_ESTIMABLE}."
    ends = " to ".join(_fewer(absolute[end]) for end in ("low", "high"))
    return f"{base}; with {intervention}, {_fewer(absolute['difference'])} per {per} (interval {ends})."


def _people(value: float) -> str:
    return number(value, 0) if value >= 10 else number(value, 1)


def _fewer(value: float | None) -> str:
    if value is None:
        return NOT_ESTIMABLE
    shown = _people(abs(value))
    if float(shown.replace("\u202f", "")) == 0:
        return "no difference to the nearest tenth"
    return f"{shown} {'fewer' if value < 0 else 'more'}"


def movement_words(value: float | None, scale: str) -> str:
    """Say by how much an estimate moved: a factor for ratios, a difference otherwise.

    Parameters
    ----------
    value : float or None
        Movement on the analysis scale.
    scale : str
        "log" or "plain".

    Returns
    -------
    str
    """
    if value is None:
        return "not measurable"
    if value == 0:
        return "none"
    if scale == "log":
        return f"\u00d7 {number(natural(value, scale), 3)}"
    return f"{'+' if value > 0 else ''}{number(value, 3)}"


def status_words(status: Body) -> str:
    """Say the status of the living review in one line.

    Parameters
    ----------
    status : mapping
        ``text`` as it is to stand, or the facts: date, searches (source to date), planned_sources,
        waiting, ongoing, update_every_days.

    Returns
    -------
    str
    """
    if status.get("text"):
        return str(status["text"])
    parts = [f"living, last run {status['date']}" if status.get("date") else "living"]
    searches = status.get("searches") or {}
    parts += [f"{source} searched to {day}" for source, day in sorted(searches.items())]
    never = sorted(set(status.get("planned_sources") or {}) - set(searches))
    if never:
        parts.append(f"no search of {', '.join(never)} recorded")
    elif not searches:
        parts.append("no search recorded")
    if status.get("waiting") is not None:
        waits = "waits" if status["waiting"] == 1 else "wait"
        parts.append(f"{plural(status['waiting'], 'result')} {waits} for verification")
    if status.get("ongoing") is not None:
        parts.append(f"{plural(status['ongoing'], 'ongoing trial')} listed")
    if status.get("update_every_days"):
        parts.append(f"an update is due every {status['update_every_days']} days")
    return "; ".join(parts)


def prediction_words(body: Body) -> str:
    """Say what the prediction interval is, or why there is none."""
    pooled = body.get("pooled") or {}
    if pooled.get("prediction_low") is None:
        return "No prediction interval: it needs a random-effects model and at least three trials."
    ends = interval(pooled["prediction_low"], pooled["prediction_high"], body["scale"], body["measure"])
    covers = pooled["prediction_low"] <= 0 <= pooled["prediction_high"]
    return f"Prediction interval for the effect in a new trial: {ends}" + (
        "; a new trial's effect may lie on either side of no effect." if covers else "."
    )
