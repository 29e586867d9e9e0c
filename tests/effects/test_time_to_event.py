import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm
from statsmodels.duration.hazard_regression import PHReg
from statsmodels.duration.survfunc import survdiff

from treering import effects
from treering.errors import AnalysisError


def test_observed_minus_expected_over_its_variance_is_the_log_hazard_ratio():
    # Parmar et al. 1998, equations 1 and 2; by hand.
    table = pd.DataFrame({"observed_minus_expected": [-12.0], "variance_oe": [40.0]})
    assert effects.effect_sizes(table, "hazard-ratio").iloc[0].tolist() == [-0.3, 0.025]


@pytest.mark.parametrize(("arm", "sign"), [("intervention", -1), ("comparator", 1)])
def test_a_log_rank_p_value_gives_the_log_hazard_ratio_with_the_stated_direction(arm, sign):
    # Parmar et al. 1998: z/sqrt(V) with V = 40*60/100 = 24, z(0.02) = 2.326348 (normal table).
    table = pd.DataFrame(
        {"p_value": [0.02], "intervention_events": [40], "comparator_events": [60], "lower_hazard": [arm]}
    )
    found = effects.effect_sizes(table, "hazard-ratio").iloc[0]
    assert found["estimate"] == pytest.approx(sign * 2.3263478740408408 / 24**0.5, rel=1e-12)
    assert found["variance"] == pytest.approx(1 / 24, rel=1e-14)


def test_a_ratio_and_its_p_value_give_the_standard_error():
    # By definition of the test: P = 0.05 puts a 95% limit exactly at no effect.
    table = pd.DataFrame({"estimate": [0.81], "p_value": [0.05]})
    found = effects.effect_sizes(table, "hazard-ratio").iloc[0]
    upper = found["estimate"] + norm.isf(0.025) * found["variance"] ** 0.5
    assert upper == pytest.approx(0, abs=1e-12)


@pytest.fixture(scope="module")
def simulated():
    """One simulated trial: exponential times with hazard ratio 0.75, censored at 2 units (seeded)."""
    rng = np.random.default_rng(20240611)
    arm = np.repeat([1, 0], 1500)
    time = rng.exponential(1 / np.where(arm == 1, 0.75, 1.0))
    return pd.DataFrame({"arm": arm, "time": np.minimum(time, 2.0), "event": (time < 2.0).astype(int)})


def test_the_log_rank_route_comes_close_to_a_regression_on_the_individual_data(simulated):
    # statsmodels: log-rank test and proportional hazards regression of the same simulated people.
    _, p_value = survdiff(simulated["time"], simulated["event"], simulated["arm"])
    fit = PHReg(simulated["time"], simulated[["arm"]], status=simulated["event"], ties="efron").fit(disp=0)
    events = simulated.groupby("arm")["event"].sum()
    table = pd.DataFrame(
        {
            "p_value": [p_value],
            "intervention_events": [events[1]],
            "comparator_events": [events[0]],
            "lower_hazard": ["intervention"],
        }
    )
    found = effects.effect_sizes(table, "hazard-ratio").iloc[0]
    # The approximation holds near no effect; at 0.75 it is off by well under half a standard error.
    assert abs(found["estimate"] - fit.params[0]) < 0.3 * fit.bse[0]
    assert found["variance"] ** 0.5 == pytest.approx(fit.bse[0], rel=0.03)


def test_one_event_in_an_arm_is_enough_for_the_log_rank_route():
    columns = {"p_value": [0.5], "intervention_events": [1], "comparator_events": [1]}
    table = pd.DataFrame(columns).assign(lower_hazard="comparator")
    # V = 1*1/2 (by hand).
    assert effects.effect_sizes(table, "hazard-ratio")["variance"].tolist() == [2.0]


def test_both_variance_formulas_agree_where_events_follow_the_allocation():
    by_events = effects.log_rank_variance(np.array([40.0]), np.array([20.0]))
    by_people = effects.log_rank_variance_by_allocation(
        np.array([60.0]), np.array([200.0]), np.array([100.0])
    )
    assert by_events[0] == pytest.approx(by_people[0], rel=1e-14)


@pytest.mark.parametrize(
    ("columns", "field"),
    [
        ({"observed_minus_expected": [1.0], "variance_oe": [-2.0]}, "variance_oe"),
        ({"observed_minus_expected": [1.0], "variance_oe": [0.0]}, "variance_oe"),
        ({"estimate": [0.8], "p_value": [0.0]}, "p_value"),
        ({"estimate": [0.8], "p_value": [1.0]}, "p_value"),
        ({"estimate": [1.0], "p_value": [0.4]}, "estimate"),
        ({"estimate": [-0.8], "p_value": [0.4]}, "estimate"),
        (
            {
                "p_value": [0.1],
                "intervention_events": [0],
                "comparator_events": [3],
                "lower_hazard": ["comparator"],
            },
            "intervention_events",
        ),
        (
            {
                "p_value": [0.1],
                "intervention_events": [2],
                "comparator_events": [3],
                "lower_hazard": ["placebo"],
            },
            "lower_hazard",
        ),
        (
            {"p_value": [0.1], "intervention_events": [2], "comparator_events": [3], "lower_hazard": [None]},
            "lower_hazard",
        ),
    ],
)
def test_faulty_survival_figures_are_refused(columns, field):
    with pytest.raises(AnalysisError, match=f"trial Alder: {field}"):
        effects.effect_sizes(pd.DataFrame(columns, index=["Alder"]), "hazard-ratio")
