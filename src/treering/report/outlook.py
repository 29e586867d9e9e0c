"""When will we know: what the ongoing trials are likely to bring, in words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.report.numbers import effect, percent

Body = Mapping[str, Any]
#: The scenarios of the forecast and how the page calls them.
SCENARIOS = {
    "no effect": "if there is no effect",
    "effect to detect": "if the effect to detect is true",
    "present trend": "if the present estimate is true",
}


def outlook_words(body: Body, names: Mapping[str, str]) -> dict[str, Any] | None:
    """Return the outlook of a monitored outcome as texts for the page.

    Parameters
    ----------
    body : mapping
        Analysis body of the outcome.
    names : mapping
        Trial id to label.

    Returns
    -------
    dict or None
        ``rows`` (date, trials, share, chances), ``heads`` of the chances, ``reaches``, ``next_lines``,
        ``not_dated``, ``lag``; None when no trial is ongoing.
    """
    found = (body.get("monitoring") or {}).get("outlook")
    if not found:
        return None
    known = found["steps"][0]["benefit"] if found["steps"] else {}
    scenarios = [name for name in SCENARIOS if name in known]
    return {
        "rows": [_row(step, scenarios, names) for step in found["steps"]],
        "heads": [SCENARIOS[name] for name in scenarios],
        "reaches": _reaches(found),
        "next_lines": _next_lines(found.get("next_trial"), body),
        "not_dated": [names.get(trial, trial) for trial in found["not_dated"]],
        "lag": found["lag_days"],
    }


def _row(step: Body, scenarios: list[str], names: Mapping[str, str]) -> dict[str, Any]:
    late = set(step["overdue"])
    trials = [f"{names.get(t, t)}{' (overdue)' if t in late else ''}" for t in step["trials"]]
    return {
        "date": step["date"],
        "trials": ", ".join(trials),
        "share": percent(step["fraction"], 1),
        "chances": [
            f"{percent(step['benefit'][name])} benefit, {percent(step['harm'][name])} harm"
            for name in scenarios
        ],
    }


def _reaches(found: Body) -> str:
    if found["reaches"]:
        return f"The required information is expected by {found['reaches']}."
    return "The ongoing trials that are known do not bring the required information."


def _next_lines(trial: Body | None, body: Body) -> list[str]:
    """Say what the next trial's own estimate must be to turn the verdict."""
    if not trial:
        return []
    ways = (
        ("to_cross_benefit", "to cross the benefit boundary"),
        ("to_cross_harm", "to cross the harm boundary"),
        ("to_undo", "to undo the standing crossing"),
    )
    return [
        "The next trial's own estimate would have to be "
        f"{effect(trial[name], body['scale'], body['measure'])} or further that way {words}."
        for name, words in ways
        if trial.get(name) is not None
    ]
