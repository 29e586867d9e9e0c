"""What may be said at a look: P value, estimate, intervals and the power that is left."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, stats

from treering.errors import AnalysisError
from treering.monitoring import (
    boundaries,
    conditional_power,
    median_unbiased,
    predictive_power,
    repeated_interval,
    stagewise_p,
    trend_drift,
)

LOOKS = np.array([0.2, 0.4, 0.6, 0.8, 1.0])


def test_the_stagewise_p_at_a_bound_is_the_alpha_spent_and_at_the_first_look_the_ordinary_p(
    published, agrees
):
    t = published["SW01"]["data"]["t"]
    z = boundaries(t).z
    found = {f"p_at_bound[{k}]": stagewise_p(t, z, k + 1, z[k]) for k in range(len(t))}
    agrees(published["SW01"], {**found, "p_first_look_z3": stagewise_p(t, z, 1, 3.0)})


@settings(max_examples=30, deadline=None)
@given(look=st.integers(1, 5), z=st.floats(-4.0, 4.0), sides=st.sampled_from([1, 2]))
def test_the_stagewise_p_is_a_probability_that_falls_as_z_moves_out(look, z, sides):
    bounds = boundaries(LOOKS, sides=sides).z
    here = stagewise_p(LOOKS, bounds, look, z, sides=sides)
    further = stagewise_p(
        LOOKS, bounds, look, z + math.copysign(0.1, z) if sides == 2 else z + 0.1, sides=sides
    )
    assert 0.0 <= further < here <= 1.0


def test_a_two_sided_stagewise_p_does_not_depend_on_the_sign():
    bounds = boundaries(LOOKS).z
    assert stagewise_p(LOOKS, bounds, 4, -2.1) == pytest.approx(stagewise_p(LOOKS, bounds, 4, 2.1))


def test_the_median_unbiased_estimate_and_interval_cover_as_they_should_in_simulated_reviews():
    # 4,000 seeded monitorings of two looks with a true effect; Monte Carlo standard error 0.008 for the
    # share of estimates above the truth, 0.0035 for coverage; tolerance three and a half of them.
    info, theta, rng = np.array([50.0, 100.0]), 0.25, np.random.default_rng(20310106)
    bounds = boundaries(info / info[-1], spending="pocock").z
    steps = rng.standard_normal((4000, 2)) * np.sqrt([50.0, 50.0]) + theta * 50.0
    z = np.cumsum(steps, axis=1) / np.sqrt(info)
    look = np.where(np.abs(z[:, 0]) >= bounds[0], 1, 2)
    seen = np.where(look == 1, z[:, 0], z[:, 1])
    tables = {}
    for at in (1, 2):
        grid = np.linspace(seen[look == at].min(), seen[look == at].max(), 60)
        rows = [median_unbiased(info, bounds, at, float(value)) for value in grid]
        tables[at] = (grid, np.array([[row.low, row.estimate, row.high] for row in rows]))
    low, middle, high = (
        np.where(look == 1, *(np.interp(seen, tables[at][0], tables[at][1][:, column]) for at in (1, 2)))
        for column in range(3)
    )
    assert np.mean(middle > theta) == pytest.approx(0.5, abs=0.028)
    assert np.mean((low < theta) & (theta < high)) == pytest.approx(0.95, abs=0.013)


def test_at_the_first_look_the_estimate_and_interval_are_the_ordinary_ones():
    found = median_unbiased([64.0], [], 1, 2.4)
    half = stats.norm.isf(0.025) / 8.0
    assert (found.low, found.estimate, found.high) == pytest.approx((0.3 - half, 0.3, 0.3 + half), abs=1e-9)


def test_the_estimate_after_an_early_crossing_is_drawn_towards_no_effect():
    bounds = boundaries(LOOKS).z
    found = median_unbiased(LOOKS * 100.0, bounds, 3, 2.9)
    assert 0.0 < found.low < found.estimate < 2.9 / math.sqrt(60.0)


def test_the_stagewise_interval_touches_no_effect_exactly_when_the_p_value_is_5_percent():
    # Duality: at the last bound P is 0.05, and the lower limit of the 95% interval is 0.
    bounds = boundaries(LOOKS).z
    assert median_unbiased(LOOKS * 100.0, bounds, 5, bounds[-1]).low == pytest.approx(0.0, abs=1e-5)
    mirrored = median_unbiased(LOOKS * 100.0, bounds, 5, -bounds[-1])
    assert mirrored.high == pytest.approx(0.0, abs=1e-5)


def test_the_repeated_interval_is_the_estimate_and_the_bound_times_its_error(published, agrees):
    data = published["RC01"]["data"]
    bound = boundaries(data["t"]).z[data["look"] - 1]
    low, high = repeated_interval(data["est"], data["se"], bound)
    agrees(published["RC01"], {"lo": low, "hi": high})


def test_without_a_bound_the_repeated_interval_is_endless():
    assert repeated_interval(0.1, 0.2, math.inf) == (-math.inf, math.inf)


def test_conditional_power_of_the_published_trial_under_no_further_effect(published, agrees):
    data = published["CP01"]["data"]
    found = conditional_power(data["z"], data["t"], critical_z=data["z_crit"], drift=data["theta"])
    agrees(published["CP01"], {"cp": found})


@pytest.mark.parametrize("drift", [0.0, trend_drift(1.2, 0.4), 3.2415])
def test_conditional_power_is_the_share_of_seeded_paths_that_end_above(drift):
    # 400,000 paths, tolerance four Monte Carlo standard errors.
    rng = np.random.default_rng(20310107)
    rest = rng.standard_normal(400_000) * math.sqrt(0.6) + drift * 0.6
    share = np.mean(1.2 * math.sqrt(0.4) + rest > 1.96)
    assert conditional_power(1.2, 0.4, critical_z=1.96, drift=drift) == pytest.approx(share, abs=0.0032)


@pytest.mark.parametrize(("prior_drift", "prior_sd"), [(0.0, math.inf), (3.0, 1.0), (0.0, 2.5)])
def test_predictive_power_is_conditional_power_averaged_over_the_posterior(prior_drift, prior_sd):
    # Independent route: scipy's adaptive quadrature over the normal posterior of the drift.
    z, t = 1.2, 0.4
    precision = t + prior_sd**-2
    mean = (z * math.sqrt(t) + prior_drift * prior_sd**-2) / precision

    def weighed(drift):
        return conditional_power(z, t, critical_z=1.96, drift=drift) * stats.norm.pdf(
            drift, mean, precision**-0.5
        )

    averaged = integrate.quad(weighed, mean - 20.0, mean + 20.0, epsabs=1e-12)[0]
    found = predictive_power(z, t, critical_z=1.96, prior_drift=prior_drift, prior_sd=prior_sd)
    assert found == pytest.approx(averaged, abs=1e-9)


@pytest.mark.parametrize("fraction", [-0.1, 1.0, 1.5, float("nan")])
def test_there_is_no_power_left_at_full_information(fraction):
    with pytest.raises(AnalysisError, match="predictive power"):
        conditional_power(1.0, fraction, critical_z=1.96, drift=0.0)


def test_without_information_a_flat_prior_predicts_nothing():
    with pytest.raises(AnalysisError, match="flat prior"):
        predictive_power(0.0, 0.0, critical_z=1.96)
    assert predictive_power(0.0, 0.0, critical_z=1.96, prior_drift=3.0, prior_sd=1.0) > 0.5


@pytest.mark.parametrize(
    ("look", "bounds", "z"),
    [(0, [3.0, 2.0], 1.0), (3, [3.0, 2.0], 1.0), (2, [], 1.0), (1, [3.0, 2.0], float("nan"))],
)
def test_a_look_that_is_not_there_is_refused(look, bounds, z):
    with pytest.raises(AnalysisError, match="no such look"):
        stagewise_p([0.5, 1.0], bounds, look, z)


def test_an_interval_level_that_is_no_level_is_refused():
    with pytest.raises(AnalysisError, match="level"):
        median_unbiased([1.0], [], 1, 1.0, level=95)


def test_a_repeated_interval_without_a_standard_error_is_refused():
    with pytest.raises(AnalysisError, match="standard error"):
        repeated_interval(0.1, 0.0, 2.0)
