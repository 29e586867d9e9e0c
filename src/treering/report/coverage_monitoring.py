"""Rules for the inputs that must stand beside every monitoring result."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from treering.protocol import Outcome
from treering.report.coverage_methods import FILLED, NOT_APPLICABLE, PARTLY, Found, share
from treering.report.view import ReportView

Monitored = tuple[Outcome, Mapping[str, Any]]


def monitored(view: ReportView) -> list[Monitored]:
    """Return the monitored outcomes with their analysis bodies."""
    return [
        (outcome, body)
        for name, body in view.analyses.items()
        if body.get("monitoring") and (outcome := view.outcome(name)) is not None
    ]


def _rule(has: Callable[[Monitored], bool], what: str) -> Callable[[ReportView], Found]:
    """Make a rule that counts the monitored outcomes for which `has` holds."""

    def rule(view: ReportView) -> Found:
        found = monitored(view)
        if not found:
            return NOT_APPLICABLE, "no outcome is monitored", ""
        return share(sum(has(pair) for pair in found), len(found), what, "outcomes")

    return rule


def _reasons(view: ReportView) -> Found:
    found = monitored(view)
    if not found:
        return NOT_APPLICABLE, "no outcome is monitored", ""
    other = [o.id for o, _ in found if o.monitoring and o.monitoring.effect != o.minimally_important]
    if other:
        return (
            PARTLY,
            f"the effect to detect is not the smallest difference that matters: {', '.join(other)}",
            "outcomes",
        )
    return FILLED, "value and reason, equal to the smallest difference that matters", "outcomes"


def _risk_is_printed(pair: Monitored) -> bool:
    outcome, _ = pair
    return outcome.comparator_risk is not None or not outcome.measure.endswith(("ratio", "risk-difference"))


def _look(pair: Monitored) -> Mapping[str, Any]:
    look = pair[1]["monitoring"].get("look")
    return look if look is not None else {}


MONITORING_RULES = {
    "M1": _rule(lambda pair: True, "monitored outcomes with alpha, sides and power"),
    "M2": _reasons,
    "M3": _rule(_risk_is_printed, "monitored outcomes with a stated comparator risk, or none needed"),
    "M4": _rule(
        lambda p: _look(p).get("required_reestimated") is not None, "outcomes with both required sizes"
    ),
    "M5": _rule(lambda p: bool(p[1]["monitoring"].get("looks")), "outcomes with their table of looks"),
    "M6": _rule(lambda p: _look(p).get("alpha_spent") is not None, "outcomes with function, spent and left"),
    "M7": _rule(lambda p: bool((p[1].get("pooled") or {}).get("method")), "outcomes with model and data"),
    "M8": _rule(lambda p: bool(p[1]["monitoring"].get("hindsight")), "outcomes with both histories"),
    "M9": _rule(lambda pair: True, "outcomes with the sentence beside each result"),
}
