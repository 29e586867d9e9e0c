"""The monitoring plan: what it fixes and what it refuses."""

import dataclasses

import pytest
from scipy.stats import norm

from treering.errors import AnalysisError
from treering.monitoring.plan import MonitoringPlan
from treering.terms import IntervalMethod, Spending


def test_required_information_is_that_of_wetterslev_on_the_information_scale():
    # ((z(0.975) + z(0.9)) / theta)^2 / (1 - D2): Wetterslev 2009, BMC Med Res Methodol 9:86.
    plan = MonitoringPlan(effect=-0.2, diversity=0.25)
    expected = ((norm.isf(0.025) + norm.isf(0.1)) / 0.2) ** 2 / 0.75
    assert plan.required_information == pytest.approx(expected, rel=1e-12)


def test_one_sided_plan_needs_less_information():
    one, two = MonitoringPlan(effect=0.2, sides=1), MonitoringPlan(effect=0.2)
    assert one.required_information < two.required_information


def test_words_become_terms_and_plain_values_again():
    plan = MonitoringPlan(effect=0.2, spending="pocock", interval="wald")
    assert plan.spending is Spending.POCOCK
    assert plan.to_dict()["spending"] == "pocock"
    assert MonitoringPlan.from_dict(plan.to_dict()) == plan


def test_a_common_effect_is_tested_by_wald():
    assert MonitoringPlan(effect=0.2, model="common").interval is IntervalMethod.WALD


def test_digest_follows_what_rules_the_ledger_and_not_the_display():
    plan = MonitoringPlan(effect=0.2)
    assert plan.digest() == MonitoringPlan(effect=0.2, level=0.9, prediction_df="k-1").digest()
    assert plan.digest() != MonitoringPlan(effect=0.2, diversity=0.1).digest()
    assert MonitoringPlan(effect=1).digest() == MonitoringPlan(effect=1.0).digest()


def test_mixture_prior_is_close_to_the_narrowest_at_the_required_information():
    # Robbins 1970: radius^2 = V (1 + V/rho^2) (log(1 + rho^2/V) - 2 log alpha).
    from numpy import log
    from scipy.optimize import minimize_scalar

    plan = MonitoringPlan(effect=0.3)
    variance = 1.0 / plan.required_information

    def radius(rho):
        return (variance * (1 + variance / rho**2) * (log(1 + rho**2 / variance) - 2 * log(0.05))) ** 0.5

    narrowest = minimize_scalar(radius, bounds=(0.01, 3.0), method="bounded").fun
    assert radius(plan.mixture_prior_sd) < 1.01 * narrowest
    assert MonitoringPlan(effect=0.3, prior_sd=0.5).mixture_prior_sd == 0.5


@pytest.mark.parametrize(
    ("role", "better", "direction"),
    [("benefit", "lower", -1), ("benefit", "higher", 1), ("harm", "lower", 1), ("harm", "higher", -1)],
)
def test_one_side_looks_for_benefit_or_for_harm(role, better, direction):
    assert MonitoringPlan(effect=0.2, sides=1, role=role, better=better).tested_direction == direction


@pytest.mark.parametrize(
    "bad",
    [
        {"effect": 0.0},
        {"effect": float("nan")},
        {"alpha": 0.0},
        {"alpha": 0.5},
        {"alpha": 5.0},
        {"power": 0.05},
        {"power": 1.0},
        {"diversity": 1.0},
        {"diversity": -0.1},
        {"sides": 3},
        {"level": 1.0},
        {"prior_sd": 0.0},
        {"spending": "obf"},
        {"tau2": "DL"},
        {"prediction_df": "k"},
        {"spending_parameter": 2.0},
        {"futility": True, "role": "harm"},
    ],
)
def test_bad_plans_are_refused_with_what_to_do(bad):
    with pytest.raises(AnalysisError) as caught:
        MonitoringPlan(**({"effect": 0.2} | bad))
    assert caught.value.next_step


def test_unknown_fields_are_refused():
    with pytest.raises(AnalysisError, match="not known"):
        MonitoringPlan.from_dict({"effect": 0.2, "beta": 0.1})


def test_a_plan_cannot_be_changed_in_place():
    with pytest.raises(dataclasses.FrozenInstanceError):
        MonitoringPlan(effect=0.2).alpha = 0.1
