"""Participants and events: the published and calculated sizes, and the translation both ways."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.errors import AnalysisError
from treering.monitoring import (
    events_for_information,
    information_per_participant,
    intervention_risk,
    required_events,
    required_information,
    required_participants,
)


def test_the_published_required_size_to_the_patient(published, agrees):
    found = required_participants(
        comparator_risk=0.05, relative_reduction=0.25, alpha=0.01, power=0.9, diversity=0.2
    )
    agrees(published["RI01"], {"n": found})


def test_the_size_by_formula_without_and_with_diversity(published, agrees):
    plan = {"comparator_risk": 0.1, "relative_reduction": 0.2, "alpha": 0.05, "power": 0.8}
    agrees(
        published["RI03"],
        {"n0": required_participants(**plan), "n50": required_participants(**plan, diversity=0.5)},
    )


def test_the_calculated_sizes_for_a_fifth_less_of_20_percent():
    # Calculated for the project, whole participants: power 80% 2896, 90% 3877; D2 0.25/0.5/0.75 at 90%:
    # 5170, 7754, 15 509.
    plan = {"comparator_risk": 0.2, "relative_reduction": 0.2}
    assert required_participants(**plan, power=0.8) == pytest.approx(2896, abs=0.5)
    sizes = [required_participants(**plan, diversity=d) for d in (0.0, 0.25, 0.5, 0.75)]
    assert sizes == pytest.approx([3877, 5170, 7754, 15509], abs=0.5)


def test_a_continuous_outcome_follows_the_classic_formula():
    # By hand: 4 x (1.95996 + 0.84162)^2 x 10^2 / 5^2 = 16 x 7.84888 = 125.58, 63 in each arm.
    assert required_participants(difference=5.0, sd=10.0, power=0.8) == pytest.approx(125.58, abs=0.005)


@given(risk=st.floats(0.05, 0.6), reduction=st.floats(0.05, 0.9))
def test_one_effect_stated_in_three_ways_needs_the_same_participants(risk, reduction):
    treated = risk * (1 - reduction)
    odds_ratio = treated / (1 - treated) / (risk / (1 - risk))
    sizes = [
        required_participants(comparator_risk=risk, relative_reduction=reduction),
        required_participants(comparator_risk=risk, odds_ratio=odds_ratio),
        required_participants(comparator_risk=risk, difference=treated - risk),
    ]
    assert sizes == pytest.approx([sizes[0]] * 3)


def test_an_odds_ratio_moves_the_odds():
    # By hand: risk 0.2 has odds 0.25; odds ratio 0.6 gives odds 0.15, risk 0.15/1.15.
    assert intervention_risk(0.2, odds_ratio=0.6) == pytest.approx(0.15 / 1.15)


def test_a_mean_difference_needs_as_many_participants_by_information_as_by_formula():
    wanted = required_participants(difference=5.0, sd=10.0)
    per_head = information_per_participant("mean-difference", sd=10.0)
    assert required_information(5.0) / per_head == pytest.approx(wanted)


@pytest.mark.parametrize(
    ("measure", "variance"),
    [
        # Large-sample variances of one trial with 20/100 and 30/100 events, by hand.
        ("risk-ratio", 1 / 20 - 1 / 100 + 1 / 30 - 1 / 100),
        ("odds-ratio", 1 / 20 + 1 / 80 + 1 / 30 + 1 / 70),
        ("risk-difference", 0.2 * 0.8 / 100 + 0.3 * 0.7 / 100),
    ],
)
def test_a_trial_brings_the_information_its_cells_say(measure, variance):
    per_head = information_per_participant(measure, comparator_risk=0.3, intervention_risk=0.2)
    assert 200 * per_head == pytest.approx(1 / variance)


def test_standardized_differences_near_none_bring_a_quarter_each():
    # 1/(1/n1 + 1/n2) with equal arms is n/4.
    assert information_per_participant("standardized-mean-difference") == pytest.approx(0.25)


def test_events_translate_information_on_a_log_hazard_ratio():
    information = required_information(math.log(0.75))
    assert events_for_information(information) == pytest.approx(required_events(0.75))


@pytest.mark.parametrize(
    "wrong",
    [
        {},
        {"comparator_risk": 0.2},
        {"comparator_risk": 0.2, "relative_reduction": 0.2, "odds_ratio": 0.8},
        {"comparator_risk": 0.2, "relative_reduction": 0.0},
        {"comparator_risk": 0.2, "relative_reduction": 1.0},
        {"comparator_risk": 20, "relative_reduction": 0.2},
        {"comparator_risk": 0.2, "odds_ratio": 1.0},
        {"comparator_risk": 0.2, "difference": 0.0},
        {"comparator_risk": 0.2, "difference": 0.1, "sd": 1.0},
        {"difference": 5.0},
        {"sd": 5.0},
        {"difference": 0.0, "sd": 1.0},
        {"difference": 1.0, "sd": 0.0},
        {"difference": 1.0, "sd": 1.0, "power": 0.04},
        {"difference": 1.0, "sd": 1.0, "diversity": 1.0},
    ],
)
def test_a_size_that_is_not_stated_once_and_soundly_is_refused(wrong):
    with pytest.raises(AnalysisError) as refusal:
        required_participants(**wrong)
    assert refusal.value.expected
    assert refusal.value.next_step


def test_a_measure_without_a_translation_is_refused():
    with pytest.raises(AnalysisError, match="no translation"):
        information_per_participant("hazard-ratio")
