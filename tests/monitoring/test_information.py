"""Required information, events and trials."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from treering.errors import AnalysisError
from treering.monitoring import detection_constant, minimum_trials, required_events, required_information


def test_the_required_information_detects_the_effect_with_the_power():
    # A single test at this information: P(Z > z(0.975)) with mean theta sqrt(information), by scipy.
    theta = math.log(0.8)
    information = required_information(theta, power=0.9)
    power = stats.norm.sf(stats.norm.isf(0.025) - abs(theta) * math.sqrt(information))
    assert power == pytest.approx(0.9, abs=1e-12)


@given(diversity=st.floats(0.0, 0.99), theta=st.floats(0.01, 3.0))
def test_diversity_divides_by_what_is_left(diversity, theta):
    plain = required_information(theta)
    assert required_information(-theta, diversity=diversity) * (1 - diversity) == pytest.approx(plain)


def test_events_for_a_hazard_ratio_of_two_thirds():
    # Schoenfeld 1981 by hand: (1.95996 + 0.84162)^2 x 4 / log(1.5)^2 = 7.84888 x 4 / 0.164402 = 190.97.
    assert required_events(2 / 3, power=0.8) == pytest.approx(190.97, abs=0.01)
    assert required_events(1.5, power=0.8) == pytest.approx(required_events(2 / 3, power=0.8))


def test_unequal_arms_need_more_events():
    assert required_events(0.7, intervention_share=2 / 3) == pytest.approx(required_events(0.7) * 9 / 8)


def test_heterogeneity_sets_a_floor_of_trials_that_no_size_replaces():
    # By hand: tau2 (3.2415/0.2)^2 = 0.05 x 262.69 = 13.1, so 14 trials; the variance tau2/k of endless
    # trials then just allows the power.
    k = minimum_trials(0.2, 0.05)
    assert k == 14
    sd = math.sqrt(0.05 / k)
    assert stats.norm.sf(stats.norm.isf(0.025) - 0.2 / sd) > 0.9
    sd = math.sqrt(0.05 / (k - 1))
    assert stats.norm.sf(stats.norm.isf(0.025) - 0.2 / sd) < 0.9


def test_trials_of_a_given_size_add_their_variance_to_the_floor():
    # By hand: (0.05 + 0.04) x 262.69 = 23.6.
    assert minimum_trials(0.2, 0.05, trial_variance=0.04) == 24


def test_without_heterogeneity_one_trial_may_do():
    assert minimum_trials(0.2, 0.0) == 1


@given(power=st.floats(0.51, 0.999), tau2=st.floats(0.0, 2.0))
def test_more_power_never_needs_fewer_trials(power, tau2):
    assert minimum_trials(0.3, tau2, power=power) >= minimum_trials(0.3, tau2, power=0.5)


@pytest.mark.parametrize(
    "wrong",
    [
        {"theta": 0.0},
        {"theta": float("nan")},
        {"alpha": 0.0},
        {"alpha": 0.5},
        {"power": 0.05},
        {"power": 0.01},
        {"power": 1.0},
        {"diversity": 1.0},
        {"diversity": 1.5},
        {"diversity": -0.1},
        {"sides": 0},
    ],
)
def test_figures_without_a_required_information_are_refused_with_what_to_do(wrong):
    with pytest.raises(AnalysisError) as refusal:
        required_information(**{"theta": -0.2, **wrong})
    assert refusal.value.found is not None
    assert refusal.value.expected
    assert refusal.value.next_step


@pytest.mark.parametrize("hazard_ratio", [0.0, 1.0, -1.0])
def test_a_hazard_ratio_that_cannot_be_detected_is_refused(hazard_ratio):
    with pytest.raises(AnalysisError):
        required_events(hazard_ratio)


def test_a_negative_between_trial_variance_is_refused():
    with pytest.raises(AnalysisError, match="tau2"):
        minimum_trials(0.2, -0.1)


def test_the_detection_constant_is_the_sum_of_two_quantiles():
    assert detection_constant(alpha=0.05, power=0.8, sides=1) == pytest.approx(1.644854 + 0.841621, abs=1e-6)
