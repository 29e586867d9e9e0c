"""Neither the names of the files, nor their order, nor how records are split over them changes a number."""

from __future__ import annotations

import itertools
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from treering.report.report_json import report_dict
from treering.update.views import version_view

TRIALS = {"T1": (24, 110, 33, 108), "T2": (30, 140, 41, 138), "T3": (15, 80, 21, 82)}


def records(review: Any) -> list[dict[str, Any]]:
    """Two readings of two trials, two of a third with a difference and what settles it, and a notice."""
    made = [review.extraction(t, person, counts) for t, counts in TRIALS.items() for person in ("AA", "BB")]
    made[-1]["results"][0]["comparator_events"] = 22
    settled = {
        "record": "adjudication",
        "trial": "T3",
        "outcome": "failed",
        "adjudicator": "CC",
        "values": {"comparator_events": 21},
        "locator": "table 2",
        "reason_class": "slip",
        "reason": "22 is the row below",
    }
    notice = {
        "record": "integrity notice",
        "trial": "T2",
        "notice": "expression of concern",
        "date": "2026-01-02",
        "reason": "by the journal",
        "seen_by": "DD",
    }
    return [*made, settled, notice]


def syntheses(review: Any, week: Callable[..., Any]) -> list[dict[str, Any]]:
    """Live the week and return the syntheses of report.json."""
    after = week(review, "2026-01-05")
    assert (after.version, after.waiting, after.returned) == (1, (), [])
    with review.store() as store:
        found: list[dict[str, Any]] = report_dict(version_view(store, 1))["syntheses"]
    assert [row["in_main"] for row in found[0]["trials"]] == [True] * 3
    return found


@pytest.fixture(scope="module")
def shared(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> dict[str, Any]:
    """Where each example lays its review, and what one file per record gave."""
    return {"folder": tmp_path_factory.mktemp("orders"), "made": 0, "class": review_class}


def fresh(shared: dict[str, Any]) -> Any:
    shared["made"] += 1
    return shared["class"](Path(shared["folder"]) / f"review{shared['made']}")


@given(
    order=st.permutations(range(8)), cuts=st.sets(st.integers(1, 7)), names=st.randoms(use_true_random=False)
)
@settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_order_and_any_split_of_the_records_give_the_same_syntheses(
    shared: dict[str, Any], week: Callable[..., Any], order: list[int], cuts: set[int], names: Any
) -> None:
    if "expected" not in shared:
        plain = fresh(shared)
        for number, record in enumerate(records(plain)):
            plain.drop(f"{number}.json", record)
        shared["expected"] = syntheses(plain, week)
    review = fresh(shared)
    shuffled = [records(review)[i] for i in order]
    edges = [0, *sorted(cuts), 8]
    for start, end in itertools.pairwise(edges):
        review.drop(f"{names.randrange(10**9):09d}-{start}.json", json.dumps(shuffled[start:end]))
    assert syntheses(review, week) == shared["expected"]
