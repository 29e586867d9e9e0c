"""The words of a notice: what happened, the effect in natural numbers, what it rests on. Pure."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

from treering.notify.event import Body, Event
from treering.terms import EventClass, NoticeKind

MINUS = "\u2212"
ASK = (
    "This notice asks you to meet and look at the evidence. It is not a recommendation, and it does not say "
    "what to do for patients."
)
_HAPPENED = {
    EventClass.CROSSING: "At this version the monitoring says: {verdict}.",
    EventClass.CROSSING_LOST: (
        "The crossing that {earlier} told of no longer stands: {verdict}. This notice weighs as much as that "
        "one did."
    ),
    EventClass.INTEGRITY: "A notice about a trial of this outcome was published: {notices}.",
    EventClass.CERTAINTY_STALE: "The certainty rating of this outcome was made on older numbers.",
    EventClass.DEFECT: "A defect in the program touched this outcome; the report says which versions.",
}


def happened(event: Event, earlier: str = "an earlier version") -> str:
    """Say in a sentence or two what happened, with the causes of what changed.

    Parameters
    ----------
    event : Event
        What happened.
    earlier : str
        How a crossing that is lost was announced, for example "the notice of version 4 (2026-02-02)".

    Returns
    -------
    str
    """
    if event.defect:
        return _defect(event.defect)
    told = _HAPPENED[event.event].format(
        verdict=_verdict(event.body), notices=_notices(event), earlier=earlier
    )
    causes = [str(cause) for cause in event.changes.get("causes", ())]
    if causes:
        told += f" What changed since the version before: {', '.join(causes)}."
    left = _left(event)
    if left:
        told += f" No longer in the main analysis: {'; '.join(left)}."
    return told


def _defect(defect: Body) -> str:
    """Say what was wrong with the program, in which versions, and what they come to now."""
    numbers = [str(number) for number in defect["versions"]]
    last = f" and {numbers[-1]}" if len(numbers) > 1 else numbers[-1]
    named = f"version{'s' if len(numbers) > 1 else ''} {', '.join(numbers[:-1])}{last}"
    return (
        f"A defect in the program ({defect['id']}) touched this outcome in {named}: {defect['description']} "
        f"{defect['again']} What was published stays as it is."
    )


def _verdict(body: Body) -> str:
    look = (body.get("monitoring") or {}).get("look") or {}
    return str(look.get("verdict") or "no look was made")


def _rows(body: Body | None) -> dict[str, Mapping[str, Any]]:
    return {str(row["trial"]): row for row in (body or {}).get("trials", ())}


def _left(event: Event) -> list[str]:
    """Name the trials that were in the main analysis before and are not now, with the reason."""
    before = _rows(event.previous)
    return [
        f"{row.get('label') or trial} ({row.get('left_out') or 'no reason stored'})"
        for trial, row in _rows(event.body).items()
        if not row.get("in_main") and before.get(trial, {}).get("in_main")
    ]


def _notices(event: Event) -> str:
    """Name the notices that stand about trials now and did not before."""
    before = _rows(event.previous)
    fresh = [
        f"{row.get('label') or trial}: {flag}"
        for trial, row in _rows(event.body).items()
        for flag in row.get("flags") or ()
        if _is_notice(flag) and flag not in (before.get(trial, {}).get("flags") or ())
    ]
    return "; ".join(fresh) or "see the report"


def _is_notice(flag: str) -> bool:
    """Tell a published notice ("retraction, 2026-01-17") from what else is flagged beside a trial."""
    return flag.split(",")[0] in {kind.value for kind in NoticeKind}


def effect(body: Body, *, without: str = "no intervention") -> Iterator[str]:
    """Yield the pooled effect and what it means per 1000 people, in natural numbers.

    Parameters
    ----------
    body : mapping
        Analysis body.
    without : str
        What the comparator is called in the protocol.

    Yields
    ------
    str
        Sentences.
    """
    pooled = body.get("pooled") or {}
    if pooled.get("estimate") is None:
        yield "No effect can be estimated in the main analysis now."
        return
    scale, unit = str(body["scale"]), f" {body['unit']}" if body.get("unit") else ""
    point, low, high = (_natural(pooled[name], scale) for name in ("estimate", "ci_low", "ci_high"))
    name = str(body["measure"]).replace("-", " ")
    trials = "1 trial" if pooled["k"] == 1 else f"{pooled['k']} trials"
    people = f" with {body['participants']} participants" if body.get("participants") else ""
    yield (
        f"{name[:1].upper()}{name[1:]} {_number(point)}{unit} ({_level(body)}interval {_number(low)} to "
        f"{_number(high)}{unit}), from {trials}{people}."
    )
    if pooled["ci_low"] <= 0 <= pooled["ci_high"]:
        yield "The interval is compatible with no effect."
    absolute = body.get("absolute")
    if absolute:
        yield _absolute(absolute, without)


def _natural(value: float, scale: str) -> float:
    """Take an effect from the analysis scale to the natural one."""
    if scale != "log":
        return value
    return math.exp(value) if value < 700 else math.inf


def _number(value: float) -> str:
    if math.isinf(value):
        return "beyond any number"
    digits = 2 if abs(value) < 100 else 0
    text = f"{abs(value):.{digits}f}"
    return f"{MINUS}{text}" if value < 0 and float(text) != 0 else text


def _level(body: Body) -> str:
    level = ((body.get("monitoring") or {}).get("plan") or {}).get("level")
    return f"{100 * level:g}% " if level else ""


def _absolute(absolute: Mapping[str, Any], without: str) -> str:
    """Say the effect as more or fewer people among, for example, 1000."""
    per = int(absolute["per"])
    base = f"{per * absolute['comparator_risk']:.1f}".removesuffix(".0")
    told = _more(absolute["difference"])
    ends = [_more(absolute[name]) for name in ("low", "high")]
    return f"Per {per} people: {told} ({ends[0]} to {ends[1]}), where {base} would have it with {without}."


def _more(value: float) -> str:
    digits = 0 if abs(value) >= 10 else 1
    size = f"{abs(value):.{digits}f}"
    return f"{size} {'fewer' if value < 0 else 'more'}" if float(size) else "none fewer or more"


def dependence(body: Body) -> str | None:
    """Say what a crossing rests on; None when there is no crossing to ask that of."""
    rests = (body.get("monitoring") or {}).get("rests_on")
    if not rests:
        return None
    told = [str(rests["sentence"])]
    if rests.get("tau2_lost") is not None:
        told.append(
            f"The crossing holds while the between-trial variance, now {_small(rests['tau2'])}, stays below "
            f"{_small(rests['tau2_lost'])}."
        )
    if rests.get("null_participants"):
        people = rests["null_participants"]
        told.append(f"One more trial of about {people} people that shows no effect at all would undo it.")
    return " ".join(told)


def rested(event: Event) -> str | None:
    """Say what a crossing rests on, or what one that is lost rested on in the version before."""
    now = dependence(event.body)
    if now or event.event is not EventClass.CROSSING_LOST:
        return now
    before = ((event.previous or {}).get("monitoring") or {}).get("rests_on")
    return f"In the version before: {before['sentence']}" if before else None


def _small(value: float) -> str:
    return f"{value:.2g}"


def certainty(rated: Body | None, version: int) -> str:
    """Say how certain people judged the evidence to be, and on which version."""
    if rated is None:
        return "Nobody has rated the certainty of this outcome yet."
    told = f"Rated {rated['rating']} on version {rated['version']}"
    if int(rated["version"]) == version:
        return f"{told}, this one."
    return f"{told}; this is version {version}, so the rating was made on older numbers."
