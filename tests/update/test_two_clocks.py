"""What was known on a day, and what was true on a day, read back as frames."""

from __future__ import annotations

from typing import Any

import pytest

from treering.store import frames_as_of
from treering.update import read_review


@pytest.fixture(scope="module")
def place(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> str:
    """Two trials, then a correction of the second and a third that was published before both."""
    review = review_class(tmp_path_factory.mktemp("clocks") / "review")
    review.drop_pair("T1", (24, 110, 33, 108), published="2025-03-01")
    review.drop_pair("T2", (30, 140, 41, 138), published="2025-06-01")
    review.update("2026-01-05")
    review.drop_pair("T2", (30, 140, 44, 138), published="2025-06-01", correction="erratum")
    review.drop_pair("Late", (10, 60, 14, 61), published="2019-05-01")
    review.update("2026-01-12")
    return read_review(review.folder).store_place


def failures(frames: dict[str, Any]) -> dict[str, int]:
    results = frames["result"]
    return {row["trial"]: row["values"]["comparator_events"] for _, row in results.iterrows()}


def test_as_known_on_a_day_nothing_later_is_in(place: str) -> None:
    assert failures(frames_as_of(place, known="2026-01-05")) == {"T1": 33, "T2": 41}
    assert failures(frames_as_of(place, known="2026-01-12")) == {"T1": 33, "T2": 44, "Late": 14}


def test_as_of_a_version_is_as_known_then(place: str) -> None:
    assert failures(frames_as_of(place, version=1)) == {"T1": 33, "T2": 41}


def test_as_true_by_a_day_only_what_had_appeared_is_in(place: str) -> None:
    assert failures(frames_as_of(place, true="2020-01-01")) == {"Late": 14}
    assert set(failures(frames_as_of(place, true="2025-04-01"))) == {"Late", "T1"}


def test_both_clocks_together_say_what_was_known_and_true(place: str) -> None:
    assert failures(frames_as_of(place, known="2026-01-05", true="2025-04-01")) == {"T1": 33}


def test_history_keeps_the_replaced_number(place: str) -> None:
    results = frames_as_of(place, history=True)["result"]
    second = results[results["trial"] == "T2"]
    assert [values["comparator_events"] for values in second["values"]] == [41, 44]
    assert second["cause"].tolist() == ["new trial", "correction"]
