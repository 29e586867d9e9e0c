"""How far one version fills each reporting item, computed from what the store holds.

Nothing is filled with invented text: an item that a person must write and nobody has written is missing.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from treering.report.coverage_conduct import CONDUCT, CONDUCT_RULES
from treering.report.coverage_items import MONITORING, MONITORING_ITEMS, PRISMA, PRISMA_ITEMS
from treering.report.coverage_methods import METHOD_RULES
from treering.report.coverage_monitoring import MONITORING_RULES
from treering.report.coverage_results import RESULT_RULES
from treering.report.view import ReportView
from treering.terms import CoverageState

#: Returns the state of an item, why, and the id of the place on the page that shows it.
Rule = Callable[[ReportView], tuple[CoverageState, str, str]]


def coverage(view: ReportView) -> list[dict[str, Any]]:
    """Return every reporting item with its state in this version.

    Parameters
    ----------
    view : ReportView
        The version.

    Returns
    -------
    list of dict
        ``standard``, ``item``, ``topic``, ``asks``, ``living``, ``fill`` (A, H or AH), ``state``, ``why`` and
        ``place`` (id on the page, or empty).
    """
    rules: dict[str, Rule] = {**METHOD_RULES, **RESULT_RULES, **MONITORING_RULES}
    asked = [
        *((PRISMA, item, rules[item.item]) for item in PRISMA_ITEMS),
        *((MONITORING, item, rules[item.item]) for item in MONITORING_ITEMS),
        *((CONDUCT, item, rule) for item, rule in CONDUCT_RULES),
    ]
    rows = []
    for standard, item, rule in asked:
        state, why, place = rule(view)
        row = {"standard": standard, **item._asdict(), "state": str(state), "why": why, "place": place}
        rows.append(row)
    return rows


def counts(rows: list[dict[str, Any]]) -> dict[str, int]:
    """Count the items in each state, in the order of the states."""
    return {str(state): sum(row["state"] == state for row in rows) for state in CoverageState}
