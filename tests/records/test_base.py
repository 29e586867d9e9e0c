"""Numbers, dates and texts are read as written or refused with a sentence; nothing is guessed."""

from __future__ import annotations

from datetime import date

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from treering.records import Values, last_day
from treering.records.base import LARGEST, plain_number, written_text


@given(st.floats(-LARGEST, LARGEST))
def test_a_number_written_out_is_the_number_read(number) -> None:
    assert plain_number(repr(number)) == number


@given(st.integers(0, 10**9))
def test_a_count_written_out_is_the_count_read(number) -> None:
    assert Values(intervention_events=str(number)).numbers() == {"intervention_events": number}


@pytest.mark.parametrize(
    "written",
    ["3,1", "1,234", "1 234", "3.1 (0.2)", "3.1%", "<0.001", "3.1±0.2", "0x10", "1_000", "٣", "one", "1e"],
)
def test_what_needs_a_guess_is_refused(written) -> None:
    with pytest.raises(ValueError, match="number"):
        plain_number(written)


@pytest.mark.parametrize("value", [True, float("nan"), float("inf"), 1e13, [1], {"a": 1}, "1e300"])
def test_what_is_no_sensible_number_is_refused(value) -> None:
    with pytest.raises(ValueError, match="number"):
        plain_number(value)


def test_empty_is_absent_and_zero_is_zero() -> None:
    assert Values(intervention_events=" ", comparator_events="0").numbers() == {"comparator_events": 0}


@pytest.mark.parametrize(
    ("written", "day"),
    [
        ("1948", date(1948, 12, 31)),
        ("2024-02", date(2024, 2, 29)),
        ("2025-12", date(2025, 12, 31)),
        ("2025-03-14", date(2025, 3, 14)),
    ],
)
def test_a_reduced_date_counts_as_its_last_day(written, day) -> None:
    assert last_day(written) == day


@pytest.mark.parametrize("written", ["25", "2025-13", "2025-02-30", "2025-1-1", "14.03.2025", ""])
def test_other_ways_to_write_a_date_are_refused(written) -> None:
    with pytest.raises(ValueError):
        last_day(written)


def test_a_text_that_no_file_can_hold_is_refused() -> None:
    with pytest.raises(ValueError, match="UTF-8"):
        written_text("\ud800")


def test_a_record_is_frozen() -> None:
    values = Values(estimate=1)
    with pytest.raises(ValidationError):
        values.estimate = 2
