"""Spending functions: how much of alpha a fraction of the information may use."""

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.errors import AnalysisError
from treering.monitoring import alpha_spent, beta_spent
from treering.terms import Spending


@pytest.mark.parametrize("sides", [1, 2])
def test_the_obrien_fleming_type_function_is_the_closed_form_applied_to_each_tail(sides):
    # Closed form 2(1 - Phi(z(1 - a/2)/sqrt t)), Lan and DeMets 1983, evaluated by mpmath in 40 digits.
    t, alpha = 0.3, 0.05
    with mpmath.workdps(40):
        tail = mpmath.mpf(alpha) / sides
        z = mpmath.sqrt(2) * mpmath.erfinv(1 - tail)
        expected = sides * mpmath.erfc(z / mpmath.sqrt(mpmath.mpf(t)) / mpmath.sqrt(2))
    assert alpha_spent([t], alpha=alpha, sides=sides)[0] == pytest.approx(float(expected), rel=1e-12)


def test_per_side_spending_at_the_quarters_is_the_calculated_row():
    # Calculated for the project by hand and printed to 4-5 decimals: 0.00002, 0.0031, 0.0193, 0.05.
    assert alpha_spent([0.25, 0.5, 0.75, 1.0]) == pytest.approx([0.00002, 0.0031, 0.0193, 0.05], abs=6e-5)


def test_the_other_families_follow_their_formulas():
    # Hand arithmetic: 0.05 ln(1 + (e-1)/2) = 0.0310057; 0.05 x 0.5^3; 0.05 (1-e^2)/(1-e^4) = 0.0059601.
    assert alpha_spent([0.5], spending="pocock")[0] == pytest.approx(0.0310057, abs=5e-8)
    assert alpha_spent([0.5], spending="power-family")[0] == pytest.approx(0.00625)
    assert alpha_spent([0.5], spending="power-family", parameter=1.0)[0] == pytest.approx(0.025)
    assert alpha_spent([0.5], spending="hwang-shih-decani")[0] == pytest.approx(0.0059601, abs=5e-8)
    assert alpha_spent([0.5], spending="hwang-shih-decani", parameter=0.0)[0] == pytest.approx(0.025)


@given(
    spending=st.sampled_from(list(Spending)),
    alpha=st.floats(1e-6, 0.49),
    sides=st.sampled_from([1, 2]),
    fractions=st.lists(st.floats(0.0, 3.0), min_size=1, max_size=20).map(sorted),
)
def test_spending_rises_from_0_to_alpha_and_stays_there(spending, alpha, sides, fractions):
    spent = alpha_spent(fractions, alpha=alpha, sides=sides, spending=spending)
    assert np.all(np.diff(spent) >= 0.0)
    assert np.all((spent >= 0.0) & (spent <= alpha))
    assert np.all(spent[np.array(fractions) >= 1.0] == alpha)
    assert alpha_spent([0.0], alpha=alpha, sides=sides, spending=spending)[0] == 0.0


def test_beta_is_spent_by_the_function_applied_once():
    # The one-sided reading: the same closed form on beta, 2(1 - Phi(1.6449/sqrt 0.2)) = 0.000235 (FU01).
    assert beta_spent([0.2, 1.0], beta=0.1) == pytest.approx([0.0002350657925853698, 0.1], rel=1e-10)


@pytest.mark.parametrize(
    "wrong",
    [
        {"alpha": 0.0},
        {"alpha": 0.5},
        {"alpha": 5},
        {"alpha": float("nan")},
        {"sides": 3},
        {"spending": "obf"},
        {"parameter": 2.0},
        {"spending": "power-family", "parameter": 0.0},
        {"spending": "hwang-shih-decani", "parameter": float("inf")},
    ],
)
def test_a_plan_that_cannot_spend_is_refused_with_what_to_do(wrong):
    with pytest.raises(AnalysisError) as refusal:
        alpha_spent([0.5, 1.0], **wrong)
    assert refusal.value.expected
    assert refusal.value.next_step


@pytest.mark.parametrize("beta", [0.0, 1.0, 10.0])
def test_a_beta_that_is_no_probability_is_refused(beta):
    with pytest.raises(AnalysisError, match="beta"):
        beta_spent([0.5], beta=beta)


def test_a_negative_fraction_is_refused():
    with pytest.raises(AnalysisError, match="fraction"):
        alpha_spent([-0.1])
