"""The calculator behind `treering boundaries`."""

import json
import math

import pytest

from treering.errors import AnalysisError
from treering.monitoring import DetectableEffect, boundary_table


def test_five_equal_looks_print_the_published_bounds_with_spending_and_nominal_p():
    # 4.877 3.357 2.680 2.290 2.031 (Lan and DeMets 1983; Reboussin et al. 2000).
    found = boundary_table(looks=5).looks
    assert found["look"].tolist() == [1, 2, 3, 4, 5]
    assert found["z"].tolist() == pytest.approx([4.877, 3.357, 2.680, 2.290, 2.031], abs=6e-4)
    assert found["alpha_at_look"].sum() == pytest.approx(0.05)
    assert found["nominal_p"].is_monotonic_increasing


def test_the_table_of_a_binary_outcome_holds_participants_information_and_trials():
    # 3877 participants: calculated for the project (20%, a fifth less, two-sided 5%, power 90%).
    effect = DetectableEffect(
        comparator_risk=0.2, relative_reduction=0.2, theta=math.log(0.8), tau2=0.05, diversity=0.5
    )
    found = boundary_table([0.5, 1.0], effect=effect)
    assert found.required["participants"] == pytest.approx(2 * 3877.24, abs=0.01)
    assert found.looks["participants"].tolist() == pytest.approx([3877.24, 2 * 3877.24], abs=0.01)
    assert found.looks["information"].iloc[-1] == found.required["information"]
    # By hand: 0.05 (3.2415/0.22314)^2 = 10.55.
    assert found.required["minimum_trials"] == 11


def test_a_hazard_ratio_gives_events_and_information():
    found = boundary_table(looks=2, effect=DetectableEffect(hazard_ratio=0.75))
    assert found.required["events"] == pytest.approx(4 * found.required["information"])


def test_futility_adds_its_bounds_and_the_inflated_sizes():
    found = boundary_table(looks=3, futility=True, effect=DetectableEffect(difference=5.0, sd=10.0))
    assert found.looks["futility_z"].iloc[-1] == found.looks["z"].iloc[-1]
    inflated = found.required["participants"] * found.required["inflation"]
    assert found.required["participants_inflated"] == pytest.approx(inflated)
    assert found.required["inflation"] > 1.0


def test_looking_costs_a_little_power():
    power = boundary_table(looks=5, power=0.9).looks["power"]
    assert power.is_monotonic_increasing
    assert 0.88 < power.iloc[-1] < 0.9


def test_the_plain_form_is_json_and_says_none_where_there_is_no_bound():
    found = boundary_table([0.5, 1.1, 1.3]).as_dict()
    assert json.loads(json.dumps(found, allow_nan=False)) == found
    assert found["looks"][2]["z"] is None
    assert "alpha/2 in each tail" in found["convention"]
    assert found["plan"]["spending"] == "obrien-fleming"


@pytest.mark.parametrize(
    "wrong", [{}, {"looks": 0}, {"looks": 3, "fractions": [0.5, 1.0]}, {"looks": 2, "power": 0.04}]
)
def test_a_table_without_looks_or_power_is_refused(wrong):
    with pytest.raises(AnalysisError) as refusal:
        boundary_table(**wrong)
    assert refusal.value.next_step
