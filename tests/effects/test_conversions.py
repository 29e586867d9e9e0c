import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import norm, ttest_ind, ttest_ind_from_stats
from statsmodels.stats.weightstats import DescrStatsW

from treering import effects
from treering.errors import AnalysisError

HANDBOOK = "Cochrane Handbook for Systematic Reviews of Interventions, version 5.1 (2011)"


def test_interval_from_p_altman_and_bland_2011_em17(agree):
    found = effects.standard_error_from_p(17, 0.032, method="approximate")
    agree(
        "EM17",
        {
            "z_approx": found["z"],
            "se_approx": found["standard_error"],
            "lo_approx": found["ci_low"],
            "hi_approx": found["ci_high"],
        },
    )


def test_z_from_p_handbook_em22(agree):
    agree("EM22", {"z": effects.z_from_p(0.008)["z"]})


def test_sd_from_p_handbook_em20(agree):
    found = effects.sd_from_p(3.8, 0.008, 25, 22)
    agree("EM20", {"t": found["t"], "se": found["standard_error"], "sd": found["sd"]})


def test_the_approximate_z_and_p_stay_close_to_the_exact_ones():
    # Altman and Bland 2011 (d2090, d2304) give their formulas for P from about 0.001 to 0.5.
    for p in (0.001, 0.01, 0.05, 0.2, 0.5):
        assert effects.z_from_p(p, method="approximate")["z"] == pytest.approx(norm.isf(p / 2), abs=0.03)
        z = norm.isf(p / 2)
        found = effects.standard_error_from_interval(z, z - 1.96, z + 1.96, method="approximate")
        assert found["p_value"] == pytest.approx(p, rel=0.06)


@settings(deadline=None)
@given(estimate=st.floats(0.05, 20).filter(lambda x: abs(math.log(x)) > 0.01), p=st.floats(1e-6, 0.9))
def test_an_interval_made_from_a_p_value_gives_it_back(estimate, p):
    made = effects.standard_error_from_p(estimate, p, scale="log")
    back = effects.standard_error_from_interval(estimate, made["ci_low"], made["ci_high"], scale="log")
    assert back["p_value"] == pytest.approx(p, rel=1e-6)
    assert back["standard_error"] == pytest.approx(made["standard_error"], rel=1e-9)


def test_an_interval_that_is_not_symmetric_on_the_log_scale_is_refused():
    with pytest.raises(AnalysisError, match="trial Alder: ci_low, ci_high: the interval is not symmetric"):
        effects.standard_error_from_interval(1.0, 0.4, 1.6, scale="log", trial="Alder")


@pytest.fixture(scope="module")
def arms():
    """Two samples of unequal size (seeded)."""
    rng = np.random.default_rng(7)
    return rng.normal(10, 4, 23), rng.normal(12, 4, 31)


def test_the_sd_of_one_sample_comes_back_from_its_interval(arms):
    # statsmodels, DescrStatsW.tconfint_mean: the t interval of a mean.
    low, high = DescrStatsW(arms[0]).tconfint_mean()
    found = effects.sd_from_interval(low, high, len(arms[0]))
    assert found["sd"] == pytest.approx(np.std(arms[0], ddof=1), rel=1e-12)
    error = effects.sd_from_standard_error(found["standard_error"], len(arms[0]))
    assert error["sd"] == pytest.approx(found["sd"], rel=1e-12)


def test_the_pooled_sd_comes_back_from_t_p_and_interval_of_the_difference(arms):
    # SciPy, ttest_ind with equal variances.
    first, second = arms
    test = ttest_ind(first, second)
    low, high = test.confidence_interval()
    difference, sizes = first.mean() - second.mean(), (len(first), len(second))
    freedom = sum(sizes) - 2
    pooled = math.sqrt(sum((len(arm) - 1) * arm.var(ddof=1) for arm in arms) / freedom)
    by_t = effects.sd_from_t(difference, test.statistic, *sizes)
    by_p = effects.sd_from_p(difference, test.pvalue, *sizes)
    by_interval = effects.sd_from_difference_interval(low, high, *sizes)
    by_error = effects.sd_from_difference_standard_error(by_interval["standard_error"], *sizes)
    for found in (by_t, by_p, by_interval, by_error):
        assert found["sd"] == pytest.approx(pooled, rel=1e-9)
    again = ttest_ind_from_stats(first.mean(), by_p["sd"], sizes[0], second.mean(), by_p["sd"], sizes[1])
    assert again.pvalue == pytest.approx(test.pvalue, rel=1e-9)


def test_the_normal_quantile_is_taken_where_asked():
    found = effects.sd_from_interval(9.02, 10.98, 100, distribution="normal")
    assert found["sd"] == pytest.approx(10 * 0.98 / 1.959963984540054, rel=1e-12)


def test_a_standardized_difference_turns_into_a_log_odds_ratio_by_chinns_factor():
    # Chinn 2000: the factor pi/sqrt(3) is 1.81.
    found = effects.log_odds_ratio_from_smd(1.0, 0.04)
    assert found["log_odds_ratio"] == pytest.approx(1.81, abs=0.005)
    back = effects.smd_from_log_odds_ratio(found["log_odds_ratio"], found["variance"])
    assert (back["smd"], back["variance"]) == (pytest.approx(1.0), pytest.approx(0.04))


def test_the_sd_of_changes_is_that_of_differences_within_people():
    # NumPy on simulated pairs (seeded): the identity var(X - Y) = var X + var Y - 2 cov(X, Y) is exact.
    pairs = np.random.default_rng(3).multivariate_normal([50, 44], [[90, 60], [60, 110]], size=400)
    before, after = pairs.T
    sds, r = pairs.std(axis=0, ddof=1), np.corrcoef(before, after)[0, 1]
    found = effects.change_from_baseline(before.mean(), sds[0], after.mean(), sds[1], correlation=r)
    assert found["sd"] == pytest.approx((after - before).std(ddof=1), rel=1e-12)
    assert found["mean"] == pytest.approx((after - before).mean(), rel=1e-12)
    assert effects.correlation_from_change(*sds, found["sd"])["correlation"] == pytest.approx(r, rel=1e-9)


def test_a_record_keeps_formula_inputs_origin_and_source():
    found = effects.sd_from_standard_error(0.5, 64, origin="table 2, page 7")
    assert found.as_dict() == {
        "formula": "sd-from-standard-error",
        "inputs": {"standard_error": 0.5, "total": 64},
        "result": {"sd": 4.0},
        "origin": "table 2, page 7",
        "citation": f"{HANDBOOK}, section 7.7.3.2",
        "remarks": [],
    }
    assert effects.sd_from_t(1, 2, 20, 20).origin == "not stated"


@pytest.mark.parametrize(
    ("call", "field"),
    [
        (lambda: effects.sd_from_standard_error(-1, 20, trial="Alder"), "standard_error"),
        (lambda: effects.sd_from_standard_error(1, 1, trial="Alder"), "total"),
        (lambda: effects.sd_from_interval(2, 1, 20, trial="Alder"), "ci_low"),
        (lambda: effects.sd_from_interval(1, 2, 20, distribution="z", trial="Alder"), "distribution"),
        (lambda: effects.sd_from_p(3, 0.0, 20, 20, trial="Alder"), "p_value"),
        (lambda: effects.sd_from_p(0, 0.5, 20, 20, trial="Alder"), "mean_difference"),
        (lambda: effects.sd_from_t(3, math.nan, 20, 20, trial="Alder"), "t_value"),
        (lambda: effects.z_from_p(1.2, trial="Alder"), "p_value"),
        (lambda: effects.z_from_p(0.2, method="rough", trial="Alder"), "method"),
        (lambda: effects.standard_error_from_p(1, 0.2, scale="log", trial="Alder"), "estimate"),
        (lambda: effects.standard_error_from_p(-1, 0.2, scale="log", trial="Alder"), "estimate"),
        (lambda: effects.standard_error_from_p(1, 0.2, scale="logit", trial="Alder"), "scale"),
        (lambda: effects.log_odds_ratio_from_smd(1, -0.1, trial="Alder"), "variance"),
        (lambda: effects.change_from_baseline(1, 2, 3, 4, correlation=1.2, trial="Alder"), "correlation"),
        (lambda: effects.correlation_from_change(2, 3, 9, trial="Alder"), "change_sd"),
        (lambda: effects.correlation_from_change(2, 3, 0.5, trial="Alder"), "change_sd"),
    ],
)
def test_a_faulty_input_is_refused_by_trial_and_field(call, field):
    with pytest.raises(AnalysisError, match=f"trial Alder: {field}"):
        call()
