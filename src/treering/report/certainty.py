"""Whether a certainty judgement still stands on the numbers it was made on.

The tool never rates; it only says that a rating is older than the numbers. A rating is stale when the
interval now lies differently against no effect or the smallest difference that matters, when a monitored
outcome gained or lost its required information, when the set of trials or the heterogeneity changed, or
when the half-yearly re-reading is overdue.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import date
from typing import Any

Body = Mapping[str, Any]

#: Change of I2 (a fraction) beyond which a rating is made on another heterogeneity; a choice of this tool.
I2_TOLERANCE = 0.25


def with_staleness(
    judgements: Sequence[Body], analyses: Mapping[str, Body], *, day: date, reread_days: int
) -> list[dict[str, Any]]:
    """Add ``stale``, ``stale_reasons`` and ``age_days`` to certainty judgements.

    Parameters
    ----------
    judgements : sequence of mapping
        Bodies of certainty judgements; ``numbers`` is what was read, ``date`` (if present) the day of rating.
    analyses : mapping
        Current analysis bodies.
    day : date
        Day of the version.
    reread_days : int
        Days after which a rating must be read again.

    Returns
    -------
    list of dict
        A judgement that already carries ``stale`` keeps it.
    """
    marked = []
    for judgement in judgements:
        age = _age(judgement, day)
        reasons = list(judgement.get("stale_reasons") or ())
        if "stale" not in judgement:
            reasons += stale_reasons(judgement, analyses.get(judgement["outcome"]), age, reread_days)
        stale = bool(judgement.get("stale", bool(reasons)))
        marked.append({**judgement, "stale": stale, "stale_reasons": reasons, "age_days": age})
    return marked


def _age(judgement: Body, day: date) -> int | None:
    rated = judgement.get("date")
    return None if not rated else (day - date.fromisoformat(rated[:10])).days


def stale_reasons(judgement: Body, body: Body | None, age: int | None, reread_days: int) -> list[str]:
    """Say why a judgement is older than the evidence; empty when it is not.

    Parameters
    ----------
    judgement : mapping
        Certainty judgement with the ``numbers`` it was made on.
    body : mapping or None
        Current analysis body of its outcome.
    age : int or None
        Days since the rating.
    reread_days : int
        Days after which it must be read again.

    Returns
    -------
    list of str
    """
    reasons = []
    if age is not None and age > reread_days:
        reasons.append(f"it was rated {age} days ago and is to be read again every {reread_days} days")
    numbers = judgement.get("numbers") or {}
    if body is None:
        return [*reasons, "its outcome has no analysis in this version"]
    if not numbers:
        return [*reasons, "it does not say which numbers it was made on"]
    return [*reasons, *_interval_reasons(numbers, body), *_evidence_reasons(numbers, body)]


def _interval_reasons(numbers: Body, body: Body) -> list[str]:
    pooled = body.get("pooled") or {}
    if any(source.get(end) is None for source in (numbers, pooled) for end in ("ci_low", "ci_high")):
        return []
    size = abs(body["mid"])
    reasons = []
    for threshold, words in ((0.0, "no effect"), (size, "a difference that matters"), (-size, None)):
        was = numbers["ci_low"] <= threshold <= numbers["ci_high"]
        now = pooled["ci_low"] <= threshold <= pooled["ci_high"]
        if was != now:
            name = words or "a difference that matters"
            reasons.append(f"the interval {'now covers' if now else 'no longer covers'} {name}")
    return sorted(set(reasons))


def _evidence_reasons(numbers: Body, body: Body) -> list[str]:
    reasons = []
    if numbers.get("k") is not None and numbers["k"] != body["k"]:
        reasons.append(f"it was made on {numbers['k']} trials; there are {body['k']} now")
    was, now = numbers.get("i2"), (body.get("pooled") or {}).get("i2")
    if was is not None and now is not None and abs(was - now) > I2_TOLERANCE:
        reasons.append("the heterogeneity changed")
    fraction = ((body.get("monitoring") or {}).get("look") or {}).get("fraction")
    rated = numbers.get("fraction")
    if rated is not None and fraction is not None and (rated >= 1) != (fraction >= 1):
        reasons.append(f"the required information was {'reached' if fraction >= 1 else 'lost'}")
    return reasons
