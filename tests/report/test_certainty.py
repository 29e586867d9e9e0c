"""A rating made on older numbers says so and why; the tool never rates."""

from __future__ import annotations

from datetime import date

import pytest

from treering.report.certainty import stale_reasons, with_staleness

BODY = {
    "k": 5,
    "mid": -0.2,
    "pooled": {"ci_low": -0.5, "ci_high": -0.1, "i2": 0.1},
    "monitoring": {"look": {"fraction": 0.9}},
}
NUMBERS = {"k": 5, "ci_low": -0.5, "ci_high": -0.1, "i2": 0.1, "fraction": 0.9}


def test_a_rating_on_the_present_numbers_stands():
    assert stale_reasons({"numbers": NUMBERS}, BODY, 10, 183) == []


@pytest.mark.parametrize(
    ("numbers", "reason"),
    [
        ({"ci_high": 0.1}, "the interval no longer covers no effect"),
        ({"ci_low": -0.15}, "the interval now covers a difference that matters"),
        ({"k": 4}, "it was made on 4 trials; there are 5 now"),
        ({"i2": 0.6}, "the heterogeneity changed"),
        ({"fraction": 1.2}, "the required information was lost"),
    ],
)
def test_a_rating_is_stale_when_the_evidence_moved_past_it(numbers, reason):
    assert stale_reasons({"numbers": NUMBERS | numbers}, BODY, 10, 183) == [reason]


def test_a_rating_is_stale_when_its_reading_is_overdue():
    (reason,) = stale_reasons({"numbers": NUMBERS}, BODY, 200, 183)
    assert reason == "it was rated 200 days ago and is to be read again every 183 days"


def test_a_rating_without_its_numbers_cannot_stand():
    assert stale_reasons({}, BODY, None, 183) == ["it does not say which numbers it was made on"]


def test_a_staleness_given_by_the_caller_is_kept():
    judgement = {"outcome": "failed", "numbers": NUMBERS, "stale": True, "date": "2031-01-01"}
    (marked,) = with_staleness([judgement], {"failed": BODY}, day=date(2031, 1, 11), reread_days=183)
    assert (marked["stale"], marked["age_days"]) == (True, 10)
