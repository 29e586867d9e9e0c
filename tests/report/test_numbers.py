"""Numbers as readers meet them."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.errors import ReportError
from treering.report.numbers import canonical, count, effect, interval, number, plural, small


def test_published_numbers_carry_ten_significant_digits():
    assert canonical({"a": [math.pi, 1e-9 / 3]}) == {"a": [3.141592654, 3.333333333e-10]}


@given(st.floats(-1e6, 1e6, allow_nan=False))
def test_rounding_twice_changes_nothing(value):
    assert canonical(canonical(value)) == canonical(value)


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_a_number_that_is_not_finite_is_refused_with_its_place(value):
    with pytest.raises(ReportError, match=r"report\.pooled\.q"):
        canonical({"pooled": {"q": value}})


def test_a_value_that_json_cannot_hold_is_refused():
    with pytest.raises(ReportError, match="complex"):
        canonical({"x": 1j})


def test_a_ratio_is_shown_on_the_natural_scale_and_a_difference_as_it_is():
    assert effect(math.log(0.75), "log") == "0.75"
    assert effect(-0.6, "plain") == "\u22120.60"


def test_rounding_never_hides_on_which_side_of_no_effect_a_value_lies():
    assert effect(math.log(0.998), "log") == "0.998"
    assert effect(-0.0004, "plain") == "\u22120.0004"
    assert effect(0.0, "log") == "1.00"


def test_what_is_not_estimable_says_so():
    assert (
        effect(None, "log") == number(None) == small(None) == interval(None, None, "log") == "not estimable"
    )
    assert interval(None, 0.0, "log") == "unbounded to 1.00"
    assert count(None) == "not reported"


def test_a_minus_sign_is_a_minus_sign_and_zero_has_none():
    assert number(-1.5) == "\u22121.50"
    assert number(-0.001) == "0.00"


def test_nouns_agree_with_their_number():
    assert [plural(1, "trial"), plural(3, "trial"), plural(2, "person")] == [
        "1 trial",
        "3 trials",
        "2 people",
    ]
