"""The measure taken for a table when nobody names one."""

import pytest

from treering.effects import usual_measure


def both(*fields):
    return [f"{arm}_{field}" for arm in ("intervention", "comparator") for field in fields]


@pytest.mark.parametrize(
    ("columns", "measure"),
    [
        (["trial", *both("events", "total")], "risk-ratio"),
        (both("events", "time"), "rate-ratio"),
        (both("mean", "sd", "total"), "mean-difference"),
        (["estimate", "standard_error"], "generic"),
    ],
)
def test_columns_of_one_kind_tell_their_usual_measure(columns, measure):
    assert usual_measure(columns) == measure


@pytest.mark.parametrize(
    "columns",
    [
        [],
        ["trial"],
        both("events"),
        ["log_estimate", "standard_error"],
        ["estimate", "ci_low", "ci_high"],
        both("events", "total", "time"),
        [*both("events", "total"), "estimate", "standard_error"],
    ],
)
def test_columns_that_fit_none_or_several_tell_nothing(columns):
    assert usual_measure(columns) is None
