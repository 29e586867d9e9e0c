"""Inverse-variance pooling against published values, statsmodels and identities."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.meta_analysis import combine_effects

from treering.errors import AnalysisError
from treering.pooling import heterogeneity_p, pool, pool_many
from treering.pooling.batch import chunks, single
from treering.pooling.inference import log_t_tail
from treering.pooling.likelihood import log_likelihood
from treering.pooling.maximum import modes
from treering.terms import Tau2

ALL_TAU2 = [str(method) for method in Tau2]
NUMBERS = ["estimate", "standard_error", "ci_low", "ci_high", "z", "p", "tau2", "tau2_low", "tau2_high"]
NUMBERS += ["q", "q_df", "q_p", "i2", "i2_low", "i2_high", "h2", "d2", "prediction_low", "prediction_high"]


def numbers(effect):
    return np.array([getattr(effect, name) for name in NUMBERS])


def natural(effect):
    return np.exp([effect.estimate, effect.ci_low, effect.ci_high])


# --- published values ---------------------------------------------------------------------------------------


def test_common_effect_of_bcg_trials_is_the_widely_reprinted_one(effects_of):
    # Colditz 1994 data, common-effect result widely reprinted, from memory (case FX02)
    found = pool(*effects_of("bcg", "risk-ratio"), model="common")
    assert found.estimate == pytest.approx(-0.4303, abs=6e-5)
    assert found.standard_error == pytest.approx(0.0405, abs=6e-5)
    assert found.q == pytest.approx(152.233, abs=6e-4)
    assert (found.q_df, found.interval, found.tau2) == (12, "wald", 0.0)


def test_fictional_continuous_trials_match_borenstein_2009_chapter_14(effects_of):
    # Borenstein et al. 2009, ch. 14, from memory (cases FX04 and RE07); the book rounds at each step
    y, v = effects_of("six_fictional", "standardized-mean-difference")
    common, random = (
        pool(y, v, model=m, tau2="dersimonian-laird", interval="wald") for m in ("common", "random")
    )
    assert common.estimate == pytest.approx(0.4142, abs=2e-4)
    assert common.standard_error == pytest.approx(0.0640, abs=6e-5)
    assert common.q == pytest.approx(12.0033, abs=6e-4)
    assert random.estimate == pytest.approx(0.3582, abs=1e-4)
    assert random.standard_error == pytest.approx(0.1055, abs=4e-4)
    assert random.tau2 == pytest.approx(0.0372, abs=2e-4)
    assert random.i2 == pytest.approx(0.5834, abs=1e-4)


@pytest.mark.parametrize(
    ("method", "tau2"),
    [
        ("dersimonian-laird", 0.3088),
        ("paule-mandel", 0.3181),
        ("reml", 0.3132),
        ("ml", 0.2800),
        ("hedges", 0.3286),
        ("sidik-jonkman", 0.3455),
        ("hunter-schmidt", 0.2284),
    ],
)
def test_tau2_of_bcg_trials_is_the_widely_reprinted_one(effects_of, method, tau2):
    # widely reprinted with the Colditz 1994 data (e.g. Viechtbauer 2005, 2007), from memory (case RE01)
    assert pool(*effects_of("bcg", "risk-ratio"), tau2=method).tau2 == pytest.approx(tau2, abs=6e-5)


def test_pooled_bcg_risk_ratio_matches_the_abstract_of_colditz_1994(effects_of):
    # 0.49 (0.34 to 0.70), from memory (case RE02)
    found = pool(*effects_of("bcg", "risk-ratio"), tau2="dersimonian-laird", interval="wald")
    assert np.exp([found.estimate, found.ci_low, found.ci_high]) == pytest.approx(
        [0.49, 0.34, 0.70], abs=6e-3
    )


def test_aspirin_trials_match_fleiss_1993(effects_of):
    # odds ratio 0.876 (0.774 to 0.992), tau2 0.0096, Q 9.95, I2 39.7%, from memory (case RE04)
    found = pool(*effects_of("aspirin", "odds-ratio"), tau2="dersimonian-laird", interval="wald")
    assert np.exp([found.estimate, found.ci_low, found.ci_high]) == pytest.approx(
        [0.8763, 0.7743, 0.9917], abs=1e-4
    )
    assert found.tau2 == pytest.approx(0.0096, abs=1e-4)
    assert found.q == pytest.approx(9.95, abs=6e-3)
    assert found.i2 == pytest.approx(0.397, abs=6e-4)


def test_q_profile_interval_matches_viechtbauer_2007(effects_of):
    # 0.1197 to 1.1115 for the BCG log risk ratios, from memory (case HT02)
    found = pool(*effects_of("bcg", "risk-ratio"))
    assert (found.tau2_low, found.tau2_high) == pytest.approx((0.1197, 1.1115), abs=6e-5)


def test_p_value_of_q_matches_a_published_table():
    # BMC Infect Dis 2014;14:91, table 2, seen; Q is printed to two decimals (case HT01)
    rows = [
        (18.56, 7, 0.00968),
        (17.55, 5, 0.00357),
        (8.57, 5, 0.1277),
        (8.93, 4, 0.06281),
        (5.14, 1, 0.02335),
    ]
    rows += [(1.05, 2, 0.59104), (1.84, 5, 0.87086)]
    q, df, p = np.array(rows).T
    assert heterogeneity_p(q, df) == pytest.approx(p, abs=2e-3, rel=2e-2)


def test_knapp_hartung_interval_of_equal_variances_is_the_t_interval_of_student_1908():
    # sleep differences: mean 1.58, 95% 0.7001 to 2.4599, P 0.002833, from memory (case HK01)
    y = [1.2, 2.4, 1.3, 1.3, 0.0, 1.0, 1.8, 0.8, 4.6, 1.4]
    found = pool(y, [0.09] * 10, interval="knapp-hartung")
    assert found.estimate == pytest.approx(1.58, abs=1e-9)
    assert (found.ci_low, found.ci_high) == pytest.approx((0.7001, 2.4599), abs=6e-5)
    assert found.p == pytest.approx(stats.ttest_1samp(y, 0).pvalue, rel=1e-12)


def test_knapp_hartung_interval_of_bcg_trials_matches_statsmodels(effects_of):
    # case HK02: statsmodels combine_effects, t interval with scaled variance
    y, v = effects_of("bcg", "risk-ratio")
    found = pool(y, v, tau2="dersimonian-laird", interval="knapp-hartung")
    peer = combine_effects(y, v, method_re="chi2", use_t=True)
    assert found.standard_error == pytest.approx(np.sqrt(peer.var_hksj_re), rel=1e-10)
    assert (found.ci_low, found.ci_high) == pytest.approx(
        (-1.1078213541683288, -0.3204130899781251), abs=1e-9
    )


def test_modified_knapp_hartung_never_goes_below_the_ordinary_variance(effects_of):
    # lidocaine trials of Hine 1989, homogeneous; Roever, Knapp, Friede 2015 (case HK05)
    y, v = effects_of("lidocaine", "odds-ratio")
    wald, plain, modified = (
        pool(y, v, interval=i) for i in ("wald", "knapp-hartung", "modified-knapp-hartung")
    )
    assert plain.standard_error < wald.standard_error == modified.standard_error
    half = stats.t.ppf(0.975, 5) * wald.standard_error
    assert modified.ci_high - modified.estimate == pytest.approx(half, rel=1e-12)


@pytest.mark.parametrize(
    ("df", "low", "high"),
    [("k-2", -2.0083759069225784, 0.5793112226062999), ("k-1", -1.995341958509105, 0.5662772741928265)],
)
def test_prediction_interval_of_bcg_trials_follows_higgins_2009(effects_of, df, low, high):
    # formula of Higgins, Thompson, Spiegelhalter 2009; t quantiles from mpmath (case PI02)
    found = pool(*effects_of("bcg", "risk-ratio"), prediction_df=df)
    assert (found.prediction_low, found.prediction_high) == pytest.approx((low, high), abs=1e-8)


def test_ml_returns_the_higher_of_two_maxima(effects_of):
    # Fleiss 1993 aspirin trials; heights from a 20,001-point grid of scipy's normal log-density (case RE10)
    y, v = effects_of("aspirin", "odds-ratio")
    (zero, top), (local, lower) = modes(single(y, v), restricted=False)
    assert pool(y, v, tau2="ml").tau2 == zero == 0.0
    assert local == pytest.approx(0.007517094327832472, abs=2e-5)
    assert top - lower == pytest.approx(0.0025823857277322837, abs=1e-6)


# --- peers and definitions ----------------------------------------------------------------------------------


@pytest.mark.parametrize(("method", "peer_method"), [("dersimonian-laird", "dl"), ("paule-mandel", "pm")])
@pytest.mark.parametrize("k", [2, 3, 8, 40])
def test_pooling_matches_statsmodels_on_random_trials(random_syntheses, method, peer_method, k):
    for y, v in zip(*random_syntheses(k, 25, k), strict=True):
        options = {"atol": 1e-10} if peer_method == "pm" else {}
        with np.errstate(invalid="ignore"):  # a negative tau2 there may make weights negative
            peer = combine_effects(y, v, method_re=peer_method, **options)
        found = pool(y, v, tau2=method, interval="wald")
        common = pool(y, v, model="common")
        assert common.estimate == pytest.approx(peer.mean_effect_fe, rel=1e-8, abs=1e-10)
        assert common.standard_error == pytest.approx(peer.sd_eff_w_fe, rel=1e-8)
        assert found.q == pytest.approx(peer.q, rel=1e-8, abs=1e-10)
        if peer.tau2 == 0.0 and found.q > k - 1:
            # statsmodels falls back to zero when rounding carries its last step past the root
            w = 1 / (v + found.tau2)
            assert (w * (y - found.estimate) ** 2).sum() == pytest.approx(k - 1, rel=1e-9)
        elif peer.tau2 >= 0:  # and leaves a negative DerSimonian-Laird tau2 as it is
            assert found.tau2 == pytest.approx(peer.tau2, rel=1e-8, abs=1e-10)
            assert found.estimate == pytest.approx(peer.mean_effect_re, rel=1e-8, abs=1e-10)
            assert found.standard_error == pytest.approx(peer.sd_eff_w_re, rel=1e-8)
            assert found.weights == pytest.approx(peer.weights_rel_re, rel=1e-8)
        else:
            assert found.tau2 == 0.0


@pytest.mark.parametrize("restricted", [True, False])
def test_no_grid_point_is_higher_than_the_likelihood_at_the_estimate(random_syntheses, restricted):
    rng = np.random.default_rng(7)
    for k in (2, 3, 5, 12):
        y, v = random_syntheses(k, 150, k, 0.02)
        # two clusters, one of precise trials: this is what makes several maxima
        y = y + (v > np.median(v)) * rng.normal(0, 1.5, (150, 1))
        method = "reml" if restricted else "ml"
        found = pool_many(y.ravel(), v.ravel(), np.repeat(np.arange(150), k), tau2=method)
        for row in range(150):
            centred = single(y[row] - y[row].mean(), v[row])
            height = log_likelihood(centred, found["tau2"].to_numpy()[[row]], restricted=restricted)
            grid = np.concatenate([[0.0], np.geomspace(1e-6, 20.0, 400)])
            everywhere = centred.columns(np.zeros(grid.size, dtype=int))
            heights = log_likelihood(everywhere, grid, restricted=restricted)
            assert height >= heights.max() - 1e-9


def test_profile_likelihood_is_that_of_the_multivariate_normal():
    # differences of our log-likelihood against scipy's density with the mean profiled out
    y, v = np.array([0.3, -0.2, 0.9]), np.array([0.1, 0.2, 0.05])

    def density(t):
        w = 1 / (v + t)
        return stats.norm.logpdf(y, (w * y).sum() / w.sum(), np.sqrt(v + t)).sum()

    ours = [float(log_likelihood(single(y, v), np.array([t]), restricted=False)[0]) for t in (0.0, 0.4)]
    assert ours[1] - ours[0] == pytest.approx(density(0.4) - density(0.0), rel=1e-12)


@pytest.mark.parametrize("interval", ["wald", "knapp-hartung", "modified-knapp-hartung"])
@pytest.mark.parametrize("method", ALL_TAU2)
def test_pool_many_equals_pool_on_each_synthesis(interval, method):
    rng = np.random.default_rng(11)
    groups = rng.permutation(np.repeat(["b", "a", "d", "c"], [1, 2, 7, 30]))
    y, v = rng.normal(size=40), rng.lognormal(size=40)
    many = pool_many(y, v, groups, tau2=method, interval=interval, level=0.9, prediction_df="k-1")
    assert list(many.index) == ["a", "b", "c", "d"]
    for name, row in many.iterrows():
        mine = groups == name
        one = pool(y[mine], v[mine], tau2=method, interval=interval, level=0.9, prediction_df="k-1")
        assert row[NUMBERS].to_numpy(float) == pytest.approx(numbers(one), rel=1e-9, abs=1e-11, nan_ok=True)
        assert row["weights"] == pytest.approx(one.weights, rel=1e-9)
        assert (row["k"], row["interval"], row["remarks"]) == (one.k, one.interval, one.remarks)


def test_a_bulk_cut_into_parts_equals_pool_on_each_synthesis():
    rng = np.random.default_rng(12)
    sizes = rng.integers(1, 60, 2500)
    groups = np.repeat(np.arange(2500), sizes)
    y, v = rng.normal(size=groups.size), rng.lognormal(size=groups.size)
    assert len(list(chunks(sizes))) > 1
    many = pool_many(y, v, groups)
    assert many["k"].tolist() == sizes.tolist()
    for name in rng.choice(2500, 60, replace=False):
        one = pool(y[groups == name], v[groups == name])
        row = many.loc[name, NUMBERS].to_numpy(float)
        assert row == pytest.approx(numbers(one), rel=1e-8, abs=1e-10, nan_ok=True)
        assert many.at[name, "weights"] == pytest.approx(one.weights, rel=1e-8)


@given(st.lists(st.integers(1, 40_000), min_size=1, max_size=40))
def test_parts_of_a_bulk_cover_every_synthesis_once(sizes):
    parts = list(chunks(np.array(sizes)))
    assert [at for part in parts for at in range(part.start, part.stop)] == list(range(len(sizes)))


def test_z_is_the_normal_quantile_of_the_planned_test(effects_of):
    found = pool(*effects_of("bcg", "risk-ratio"))
    t = found.estimate / found.standard_error
    assert found.p == pytest.approx(2 * stats.t.sf(abs(t), 12), rel=1e-12)
    assert found.z == pytest.approx(-stats.norm.isf(found.p / 2), rel=1e-12)
    wald = pool(*effects_of("bcg", "risk-ratio"), interval="wald")
    assert wald.z == pytest.approx(wald.estimate / wald.standard_error, rel=1e-14)
    assert wald.p == pytest.approx(2 * stats.norm.sf(abs(wald.z)), rel=1e-10)


def test_z_stays_finite_where_the_p_value_underflows():
    # 400 equal trials far from zero: t about 5,000 on 399 degrees of freedom; tail by mpmath below
    y = 5.0 + 0.001 * np.tile([-1.0, 1.0], 200)
    found = pool(y, np.full(400, 1e-6), interval="knapp-hartung")
    assert found.p == 0.0
    assert 30.0 < found.z < np.inf


def test_log_tail_of_t_matches_high_precision():
    import mpmath

    for df, t in ((2, 3.0), (5, 40.0), (399, 5000.0)):
        with mpmath.workdps(40):
            x = mpmath.mpf(df) / (df + mpmath.mpf(t) ** 2)
            exact = mpmath.log(mpmath.betainc(mpmath.mpf(df) / 2, 0.5, 0, x, regularized=True) / 2)
        assert log_t_tail(np.array([float(df)]), np.array([t]))[0] == pytest.approx(float(exact), rel=1e-12)


def test_q_profile_limits_put_q_at_its_quantiles(random_syntheses):
    for y, v in zip(*random_syntheses(3, 20, 9, 0.3), strict=True):
        found = pool(y, v, level=0.9)
        for limit, tail in ((found.tau2_low, 0.05), (found.tau2_high, 0.95)):
            w = 1 / (v + limit)
            q = (w * (y - (w * y).sum() / w.sum()) ** 2).sum()
            quantile = stats.chi2.isf(tail, 8)
            assert q == pytest.approx(quantile, rel=1e-9) if limit > 0 else q <= quantile


# --- rules --------------------------------------------------------------------------------------------------

syntheses = st.integers(2, 12).flatmap(
    lambda k: st.tuples(
        st.lists(st.floats(-3, 3), min_size=k, max_size=k),
        st.lists(st.floats(0.01, 4), min_size=k, max_size=k),
    ).map(lambda pair: (np.array(pair[0]), np.array(pair[1])))
)


@given(syntheses, st.sampled_from(ALL_TAU2), st.randoms(use_true_random=False))
def test_order_of_trials_does_not_matter(data, method, random):
    y, v = data
    order = np.array(random.sample(range(y.size), y.size))
    one, other = pool(y, v, tau2=method), pool(y[order], v[order], tau2=method)
    assert numbers(other) == pytest.approx(numbers(one), rel=1e-6, abs=1e-7, nan_ok=True)
    assert other.weights == pytest.approx(one.weights[order], rel=1e-6)


@given(syntheses, st.sampled_from(ALL_TAU2))
def test_swapping_the_arms_mirrors_the_result(data, method):
    y, v = data
    one, other = pool(y, v, tau2=method), pool(-y, v, tau2=method)
    assert (other.estimate, other.ci_low, other.ci_high) == pytest.approx(
        (-one.estimate, -one.ci_high, -one.ci_low), rel=1e-9, abs=1e-12
    )
    assert (other.tau2, other.q, other.i2, other.d2) == pytest.approx(
        (one.tau2, one.q, one.i2, one.d2), rel=1e-9, abs=1e-12
    )


@given(syntheses, st.sampled_from(ALL_TAU2), st.floats(0.001, 1000))
def test_another_unit_changes_only_the_unit(data, method, unit):
    y, v = data
    one, other = pool(y, v, tau2=method), pool(unit * y, unit**2 * v, tau2=method)
    assert other.estimate == pytest.approx(unit * one.estimate, rel=1e-6, abs=1e-7 * unit)
    assert other.tau2 == pytest.approx(unit**2 * one.tau2, rel=1e-6, abs=1e-7 * unit**2)
    assert (other.q, other.i2, other.d2) == pytest.approx((one.q, one.i2, one.d2), rel=1e-6, abs=1e-7)


@given(syntheses)
def test_a_duplicated_set_of_trials_halves_the_common_variance_and_doubles_q(data):
    y, v = data
    one, twice = pool(y, v, model="common"), pool(np.tile(y, 2), np.tile(v, 2), model="common")
    assert twice.estimate == pytest.approx(one.estimate, rel=1e-9, abs=1e-12)
    assert twice.standard_error**2 == pytest.approx(one.standard_error**2 / 2, rel=1e-12)
    assert twice.q == pytest.approx(2 * one.q, rel=1e-9, abs=1e-12)


@given(syntheses, st.sampled_from(ALL_TAU2))
def test_without_between_trial_variance_random_equals_common(data, method):
    y, v = data
    random, common = pool(y, v, tau2=method, interval="wald"), pool(y, v, model="common")
    if random.tau2 == 0.0:
        assert random.d2 == pytest.approx(0.0, abs=1e-12)
        assert (random.estimate, random.standard_error) == pytest.approx(
            (common.estimate, common.standard_error)
        )
    elif random.tau2 > 1e-12 * v.max():  # below that v + tau2 is v in double precision
        assert random.standard_error > common.standard_error


@given(syntheses)
def test_diversity_is_at_least_i2_with_the_dersimonian_laird_tau2(data):
    # Wetterslev et al. 2009
    found = pool(*data, tau2="dersimonian-laird")
    assert found.d2 >= found.i2 - 1e-9


@given(syntheses, syntheses)
def test_q_splits_into_within_and_between_groups(one, other):
    # identity for a common effect (case SG03)
    parts = [pool(*data, model="common") for data in (one, other)]
    whole = pool(np.concatenate([one[0], other[0]]), np.concatenate([one[1], other[1]]), model="common")
    between = pool([part.estimate for part in parts], [p.standard_error**2 for p in parts], model="common")
    assert whole.q == pytest.approx(sum(part.q for part in parts) + between.q, rel=1e-8, abs=1e-8)


@given(syntheses, st.sampled_from(ALL_TAU2))
def test_i2_and_tau2_intervals_hold_together(data, method):
    found = pool(*data, tau2=method)
    assert found.tau2 >= 0
    assert 0 <= found.tau2_low <= found.tau2_high
    assert 0 <= found.i2 < 1
    if found.k > 2:
        assert found.i2_low <= found.i2 + 1e-12
        assert found.i2 <= found.i2_high + 1e-12
    assert found.weights.sum() == pytest.approx(1.0)


# --- edges and bad input ------------------------------------------------------------------------------------


def test_one_trial_pools_to_itself_and_says_what_is_not_estimable():
    found = pool([0.3], [0.04])
    assert (found.estimate, found.standard_error, found.k, found.interval) == (0.3, 0.2, 1, "wald")
    assert found.ci_high == pytest.approx(0.3 + 1.959963984540054 * 0.2)
    assert set(found.not_estimable) == {
        *("tau2", "tau2_low", "tau2_high", "q_p", "i2", "i2_low", "i2_high", "h2", "d2"),
        *("prediction_low", "prediction_high"),
    }
    assert "not estimable" in found.remarks[0]


def test_two_trials_have_a_prediction_interval_on_k_minus_1_only():
    assert "prediction_low" in pool([0.1, 0.9], [0.1, 0.1]).not_estimable
    assert "prediction_low" not in pool([0.1, 0.9], [0.1, 0.1], prediction_df="k-1").not_estimable


def test_estimates_without_spread_leave_the_plain_knapp_hartung_test_open_and_say_so():
    found = pool([0.5, 0.5, 0.5], [0.1, 0.2, 0.3], interval="knapp-hartung")
    assert {"z", "p"} <= set(found.not_estimable)
    assert any("do not differ" in remark for remark in found.remarks)
    assert not {"z", "p"} & set(pool([0.5, 0.5, 0.5], [0.1, 0.2, 0.3]).not_estimable)


@pytest.mark.parametrize(
    ("y", "v", "words"),
    [
        ([0.1, np.nan], [1, 1], "trial 2: estimate"),
        ([0.1, 0.2], [1, -1], "trial 2: variance"),
        ([0.1, 0.2], [0, 1], "trial 1: variance"),
        ([0.1, 0.2], [1, np.inf], "trial 2: variance"),
        (pd.Series([0.1, 0.2], index=["Abel", "Baker"]), [1, -1], "trial Baker: variance"),
        ([], [], "no trial"),
        ([0.1, 0.2], [1], "length"),
        (["x"], [1], "trial 1: estimates must be numbers"),
        ([0.1, None], [1, 1], "trial 2: estimate"),
        ([0.1, 0.2], [True, True], "trial 1: variances must be numbers"),
        (pd.Series([0.1, pd.NA], index=["Abel", "Baker"], dtype="Float64"), [1, 1], "trial Baker: estimate"),
        ([0.1, 0.2], pd.Series([1, "x"], index=["Abel", "Baker"]), "trial Baker: variances must be numbers"),
        (np.array([1 + 1j, 2]), [1, 1], "trial 1: estimates must be numbers"),
        ([10**400, 1], [1, 1], "trial 1: estimates must be numbers"),
        (np.ma.array([0.1, 0.2], mask=[False, True]), [1, 1], "trial 2: estimate"),
        (pd.to_datetime(["2020-01-01", "2021-01-01"]), [1, 1], "numbers"),
        ([[0.1], [0.2, 0.3]], [1, 1], "one list of numbers"),
        (None, None, "one list of numbers"),
        (pd.Series([0.1, 0.2], index=["A", "B"]), pd.Series([1, 2], index=["B", "A"]), "another order"),
        ([1e200, -1e200], [1e-300, 1e-300], "too large or too small"),
    ],
)
def test_bad_numbers_are_refused_with_trial_and_field(y, v, words):
    with pytest.raises(AnalysisError, match=words):
        pool(y, v)


@pytest.mark.parametrize("option", ["model", "tau2", "interval", "prediction_df", "level"])
def test_an_unknown_option_is_refused_by_name(option):
    with pytest.raises(AnalysisError, match=option):
        pool([0.1, 0.2], [1, 1], **{option: 7 if option == "level" else "DL"})


@pytest.mark.parametrize("level", ["0.9", None, [0.9], np.array([0.9, 0.95]), True, np.nan])
def test_a_level_that_is_no_fraction_is_refused(level):
    with pytest.raises(AnalysisError, match="level"):
        pool([0.1, 0.2], [1, 1], level=level)


def test_a_trial_without_a_group_is_refused_by_name():
    with pytest.raises(AnalysisError, match="trial 2: group"):
        pool_many([0.1, 0.2], [1, 1], ["a", None])
    with pytest.raises(AnalysisError, match="trial Baker: group"):
        pool_many(pd.Series([0.1, 0.2], index=["Abel", "Baker"]), [1, 1], [1, np.nan])


@pytest.mark.parametrize("groups", ["ab", None, {"a": 1, "b": 2}, [["a"], ["b"]], [{1}, {2}], np.eye(2)])
def test_groups_that_are_no_list_of_names_are_refused(groups):
    with pytest.raises(AnalysisError, match="groups"):
        pool_many([0.1, 0.2], [1, 1], groups)


def test_groups_may_be_pairs_or_of_mixed_kinds():
    assert pool_many([0.1, 0.2, 0.3], [1, 1, 1], [("a", 1), ("b", 1), ("a", 1)])["k"].tolist() == [2, 1]
    assert pool_many([0.1, 0.2, 0.3], [1, 1, 1], [1, "1", 1])["k"].tolist() == [2, 1]


def test_groups_listed_in_another_order_than_the_estimates_are_refused():
    with pytest.raises(AnalysisError, match="another order"):
        pool_many(pd.Series([0.1, 0.2]), [1, 1], pd.Series(["a", "b"], index=[1, 0]))


def test_diversity_without_between_trial_variance_is_exactly_zero_in_bulk():
    rng = np.random.default_rng(11)
    y, v = rng.normal(0, 0.5, 4000), rng.uniform(0.1, 2, 4000)
    y[:4], v[:4] = [-5, 5, -4, 4], 0.1  # one synthesis with tau2, so that the others are summed again
    many = pool_many(y, v, np.repeat(np.arange(1000), 4))
    assert (many["tau2"] == 0).any()
    assert (many["tau2"] > 0).any()
    assert (many["d2"][many["tau2"] == 0] == 0).all()


def test_a_lone_trial_among_many_syntheses_says_that_its_interval_is_the_ordinary_one():
    counts = np.tile([3, 1, 2], 30_000)  # more than one rectangle of numbers; the first has lone trials too
    v = np.full(counts.sum(), 0.04)
    y = np.tile([0.1, 0.3, 0.2, 0.5, 0.0, 0.4], 30_000)
    many = pool_many(y, v, np.repeat(np.arange(counts.size), counts))
    assert list(many["interval"][:3]) == ["modified-knapp-hartung", "wald", "modified-knapp-hartung"]
    assert many["interval"].value_counts().to_dict() == {"modified-knapp-hartung": 60_000, "wald": 30_000}
    together = pool_many(y[:3], v[:3], [0, 0, 0])
    assert together["interval"].item() == pool(y[:3], v[:3]).interval == "modified-knapp-hartung"
    assert pool([0.5], [0.04]).interval == "wald"


@pytest.mark.parametrize("entry", ["1_0", "nan", True, 1j, 10**400])
def test_what_tables_do_not_take_for_a_number_lists_do_not_take_either(entry):
    with pytest.raises(AnalysisError, match=r"trial 2: estimates must be numbers"):
        pool(np.array([0.1, entry], dtype=object), [0.04, 0.04])
