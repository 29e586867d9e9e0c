"""Leave-one-out, influence and cumulative pooling against refits, statsmodels and definitions."""

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from statsmodels.stats.meta_analysis import combine_effects

from treering.errors import AnalysisError
from treering.pooling import cumulative, influence, leave_one_out, pool


def without(array, at):
    return np.delete(np.asarray(array), at)


def test_leave_one_out_of_bcg_trials_matches_statsmodels_on_each_subset(effects_of):
    # case LO01
    y, v = effects_of("bcg", "risk-ratio")
    found = leave_one_out(y, v, tau2="dersimonian-laird", interval="wald")
    for at in range(13):
        peer = combine_effects(without(y, at), without(v, at), method_re="dl")
        assert found["estimate"].iloc[at] == pytest.approx(peer.mean_effect_re, abs=1e-9)
        assert found["standard_error"].iloc[at] == pytest.approx(peer.sd_eff_w_re, abs=1e-9)
    assert found["estimate"].iloc[0] == pytest.approx(-0.7051251984174507, abs=1e-9)


@pytest.mark.parametrize(
    "method", ["reml", "ml", "paule-mandel", "hedges", "sidik-jonkman", "hunter-schmidt"]
)
def test_leave_one_out_equals_pooling_without_the_trial(random_syntheses, method):
    (y,), (v,) = random_syntheses(1, 1, 9, 0.4)
    found = leave_one_out(y, v, tau2=method)
    for at in range(9):
        one = pool(without(y, at), without(v, at), tau2=method)
        for field in ("estimate", "ci_low", "ci_high", "tau2", "tau2_high", "q", "z", "prediction_low", "k"):
            assert found[field].iloc[at] == pytest.approx(getattr(one, field), rel=1e-9)


def test_cumulative_pooling_equals_pooling_the_first_trials(random_syntheses):
    (y,), (v,) = random_syntheses(2, 1, 6, 0.4)
    years = np.array([2003, 2001, 2002, 2001, 2010, 1999])
    found = cumulative(pd.Series(y, index=list("abcdef")), v, order=years)
    assert list(found.index) == ["f", "b", "d", "c", "a", "e"]
    order = [5, 1, 3, 2, 0, 4]
    for step in range(6):
        one = pool(y[order[: step + 1]], v[order[: step + 1]])
        assert found["estimate"].iloc[step] == pytest.approx(one.estimate, rel=1e-9)
        assert found["tau2"].iloc[step] == pytest.approx(one.tau2, rel=1e-9, nan_ok=True)
        assert found["remarks"].iloc[step] == one.remarks


def test_influence_follows_the_definitions_of_viechtbauer_and_cheung_2010(effects_of):
    y, v = effects_of("bcg", "risk-ratio")
    found, whole = influence(y, v), pool(y, v, interval="wald")
    for at in range(13):
        rest = pool(without(y, at), without(v, at), interval="wald")
        shift, own, own_rest = whole.estimate - rest.estimate, whole.standard_error**2, rest.standard_error**2
        hat = whole.weights[at]
        expected = {
            "hat": hat,
            "standardized_residual": (y[at] - whole.estimate) / np.sqrt((v[at] + whole.tau2) * (1 - hat)),
            "studentized_residual": (y[at] - rest.estimate) / np.sqrt(v[at] + rest.tau2 + own_rest),
            "dffits": shift / np.sqrt(hat * (v[at] + rest.tau2)),
            "cooks_distance": shift**2 / own,
            "covariance_ratio": own_rest / own,
        }
        for field, value in expected.items():
            assert found[field].iloc[at] == pytest.approx(value, rel=1e-9)


def test_hat_values_of_a_common_effect_are_those_of_weighted_least_squares(effects_of):
    y, v = effects_of("bcg", "risk-ratio")
    line = sm.WLS(y, np.ones(13), weights=1 / v).fit()
    root = np.sqrt(1 / v)
    leverage = sm.OLS(root * y, root).fit().get_influence().hat_matrix_diag
    found = influence(y, v, model="common")
    assert found["hat"].to_numpy() == pytest.approx(leverage, rel=1e-10)
    assert found["standardized_residual"].to_numpy() == pytest.approx(
        line.wresid / np.sqrt(1 - leverage), rel=1e-8
    )


def test_a_single_trial_cannot_be_left_out():
    with pytest.raises(AnalysisError, match="only trial"):
        leave_one_out([0.1], [0.2])


def test_an_order_with_a_gap_is_refused():
    with pytest.raises(AnalysisError, match="order"):
        cumulative([0.1, 0.2], [1, 1], order=[2001, np.nan])


def test_a_gap_among_dates_is_refused_by_trial():
    dates = pd.to_datetime(["2020-01-01", None, "2019-01-01"])
    with pytest.raises(AnalysisError, match="trial Baker: order"):
        cumulative(pd.Series([1, 2, 3], index=["Abel", "Baker", "Cole"]), [1, 1, 1], order=dates)
    whole = cumulative([1, 2, 3], [1, 1, 1], order=dates.fillna(pd.Timestamp("2021-01-01")))
    assert list(whole.index) == [3, 1, 2]
