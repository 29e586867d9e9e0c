"""Numbers as they are stored: ten digits, None when not estimable, the form they have after JSON."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.synthesis import plain, rounded
from treering.terms import Verdict


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e12, max_value=1e12))
def test_a_number_keeps_ten_significant_digits(value: float) -> None:
    assert rounded(value) == pytest.approx(value, rel=5e-10, abs=1e-300)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_stored_number_is_what_json_gives_back(value: float) -> None:
    stored = rounded(value)
    again = json.loads(json.dumps(stored))
    assert (type(again), again) == (type(stored), stored)
    assert rounded(again) == stored


@pytest.mark.parametrize("value", [float("nan"), float("inf"), -float("inf")])
def test_what_is_not_finite_is_none(value: float) -> None:
    assert rounded(value) is None


def test_minus_zero_is_zero() -> None:
    assert json.dumps(rounded(-0.0)) == "0"


def test_everything_becomes_plain_and_sorted() -> None:
    body = {
        "b": np.float64(1.5),
        "a": (np.int64(2), np.bool_(True), Verdict.ACCRUING, None),
        "c": np.array([1.0]),
    }
    assert json.dumps(plain(body)) == '{"a": [2, true, "accruing", null], "b": 1.5, "c": [1]}'


def test_an_unknown_type_is_refused() -> None:
    with pytest.raises(TypeError, match="no plain JSON form"):
        plain(object())
