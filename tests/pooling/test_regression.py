"""Meta-regression against statsmodels, scipy's multivariate normal and published values."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import linalg, optimize, stats

from treering.effects import effect_sizes
from treering.errors import AnalysisError
from treering.pooling import pool
from treering.pooling.regression import MetaRegression, meta_regression

PUBLISHED = Path(__file__).parents[1] / "published" / "bcg_latitude.json"


@pytest.fixture(scope="module")
def published() -> dict:
    return json.loads(PUBLISHED.read_text())


@pytest.fixture(scope="module")
def bcg(published: dict) -> tuple[np.ndarray, np.ndarray, pd.DataFrame]:
    sizes = effect_sizes(pd.DataFrame(published["rows"], columns=published["columns"]), "risk-ratio")
    return (
        sizes.estimate.to_numpy(),
        sizes.variance.to_numpy(),
        pd.DataFrame({"latitude": published["latitude"]}),
    )


def random_trials(seed: int, k: int = 14) -> tuple[np.ndarray, np.ndarray, pd.DataFrame]:
    rng = np.random.default_rng(seed)
    x = pd.DataFrame({"dose": rng.normal(0, 1, k), "year": rng.integers(1990, 2020, k)})
    v = rng.uniform(0.02, 0.3, k)
    return 0.3 * x["dose"].to_numpy() + rng.normal(0, np.sqrt(v + 0.1)), v, x


def matrix(x: pd.DataFrame) -> np.ndarray:
    return sm.add_constant(x.to_numpy(dtype=float))


def estimates(fit: MetaRegression, field: str = "estimate") -> list[float]:
    return [getattr(row, field) for row in fit.coefficients]


def test_common_effect_agrees_with_the_published_bcg_regression(bcg: tuple, published: dict) -> None:
    fit, expected = meta_regression(*bcg, model="common"), published["regression"]["common"]
    intercept, slope = fit.coefficients
    assert intercept.estimate == pytest.approx(expected["intercept"], abs=6e-5)
    assert intercept.standard_error == pytest.approx(expected["intercept_se"], abs=6e-5)
    assert slope.estimate == pytest.approx(expected["slope"], abs=6e-5)
    assert slope.standard_error == pytest.approx(expected["slope_se"], abs=6e-5)
    assert fit.test == pytest.approx(expected["q_model"], abs=2e-4)
    assert fit.q == pytest.approx(expected["q_residual"], abs=6e-5)


def test_moment_estimator_agrees_with_the_published_bcg_regression(bcg: tuple, published: dict) -> None:
    fit = meta_regression(*bcg, tau2="dersimonian-laird", interval="wald")
    expected = published["regression"]["random_dersimonian_laird_wald"]
    intercept, slope = fit.coefficients
    assert intercept.estimate == pytest.approx(expected["intercept"], abs=6e-5)
    assert intercept.standard_error == pytest.approx(expected["intercept_se"], abs=6e-5)
    assert slope.standard_error == pytest.approx(expected["slope_se"], abs=6e-5)
    assert slope.statistic == pytest.approx(expected["z"], abs=6e-5)
    assert fit.tau2 == pytest.approx(expected["tau2"], abs=6e-5)
    assert fit.r2 == pytest.approx(expected["r2"], abs=6e-5)


@given(seed=st.integers(0, 10_000))
@settings(max_examples=25, deadline=None)
def test_common_effect_is_weighted_least_squares(seed: int) -> None:
    y, v, x = random_trials(seed)
    peer = sm.WLS(y, matrix(x), weights=1 / v).fit()
    fit = meta_regression(y, v, x, model="common")
    assert estimates(fit) == pytest.approx(peer.params, rel=1e-7, abs=1e-9)
    np.testing.assert_allclose(fit.covariance, peer.normalized_cov_params, rtol=1e-6, atol=1e-12)
    assert fit.q == pytest.approx(np.sum(peer.wresid**2), rel=1e-8)


@given(seed=st.integers(0, 10_000))
@settings(max_examples=25, deadline=None)
def test_knapp_hartung_is_weighted_least_squares_at_the_estimated_weights(seed: int) -> None:
    # WLS estimates the scale from the residuals: that is the Knapp-Hartung covariance, t and F test
    y, v, x = random_trials(seed)
    fit = meta_regression(y, v, x, interval="knapp-hartung")
    peer = sm.WLS(y, matrix(x), weights=1 / (v + fit.tau2)).fit()
    assert estimates(fit, "standard_error") == pytest.approx(peer.bse, rel=1e-7)
    assert estimates(fit, "p") == pytest.approx(peer.pvalues, rel=1e-6)
    np.testing.assert_allclose(
        [[row.ci_low, row.ci_high] for row in fit.coefficients], peer.conf_int(), rtol=1e-6, atol=1e-8
    )
    assert fit.test == pytest.approx(peer.fvalue, rel=1e-6)
    assert fit.test_p == pytest.approx(peer.f_pvalue, rel=1e-6)


def test_modified_interval_is_never_narrower_than_the_ordinary_one() -> None:
    for seed in range(30):
        y, v, x = random_trials(seed)
        fits = [meta_regression(y, v, x, interval=word) for word in ("modified-knapp-hartung", "wald")]
        assert all(a >= b for a, b in zip(*(estimates(f, "standard_error") for f in fits), strict=True))


@pytest.mark.parametrize("seed", [1, 2, 3, 4])
def test_reml_maximises_the_density_of_error_contrasts(seed: int) -> None:
    # restricted likelihood = multivariate normal density (scipy) of any basis of contrasts free of X
    y, v, x = random_trials(seed)
    contrasts = linalg.null_space(matrix(x).T)

    def negative(tau2: float) -> float:
        covariance = contrasts.T @ np.diag(v + tau2) @ contrasts
        return -stats.multivariate_normal.logpdf(contrasts.T @ y, cov=covariance)

    found = optimize.minimize_scalar(negative, bounds=(0, 3), method="bounded", options={"xatol": 1e-10})
    expected = 0.0 if negative(0.0) <= found.fun else found.x
    assert meta_regression(y, v, x, tau2="reml").tau2 == pytest.approx(expected, abs=2e-6)


@pytest.mark.parametrize("seed", [1, 2, 3, 4])
def test_ml_maximises_the_multivariate_normal_density(seed: int) -> None:
    y, v, x = random_trials(seed)

    def negative(tau2: float) -> float:
        mean = sm.WLS(y, matrix(x), weights=1 / (v + tau2)).fit().fittedvalues
        return -stats.norm.logpdf(y, mean, np.sqrt(v + tau2)).sum()

    found = optimize.minimize_scalar(negative, bounds=(0, 3), method="bounded", options={"xatol": 1e-10})
    expected = 0.0 if negative(0.0) <= found.fun else found.x
    assert meta_regression(y, v, x, tau2="ml").tau2 == pytest.approx(expected, abs=2e-6)


def test_paule_mandel_sets_the_residual_q_to_its_degrees_of_freedom(bcg: tuple) -> None:
    y, v, x = bcg
    fit = meta_regression(y, v, x, tau2="paule-mandel")
    peer = sm.WLS(y, matrix(x), weights=1 / (v + fit.tau2)).fit()
    assert np.sum(peer.wresid**2) == pytest.approx(11, abs=1e-8)


def test_q_profile_limits_put_the_residual_q_on_the_chi_square_quantiles(bcg: tuple) -> None:
    y, v, x = bcg
    fit = meta_regression(y, v, x)
    for limit, probability in ((fit.tau2_low, 0.975), (fit.tau2_high, 0.025)):
        peer = sm.WLS(y, matrix(x), weights=1 / (v + limit)).fit()
        assert np.sum(peer.wresid**2) == pytest.approx(stats.chi2.ppf(probability, 11), rel=1e-8)


def test_hedges_estimator_is_unbiased_in_its_own_formula() -> None:
    # E(y'My) = tr(M (V + tau2 I)) for M = I - X (X'X)^-1 X'; solved for tau2 by brute force
    y, v, x = random_trials(5)
    residual = sm.OLS(y, matrix(x)).fit()
    projection = np.eye(len(y)) - matrix(x) @ np.linalg.pinv(matrix(x))
    expected = max(0.0, (residual.ssr - np.trace(projection @ np.diag(v))) / residual.df_resid)
    assert meta_regression(y, v, x, tau2="hedges").tau2 == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize("method", ["reml", "ml", "paule-mandel", "dersimonian-laird", "hedges"])
def test_the_variance_without_covariates_is_that_of_pool(bcg: tuple, method: str) -> None:
    y, v, x = bcg
    assert meta_regression(y, v, x, tau2=method).tau2_without == pytest.approx(
        pool(y, v, tau2=method).tau2, abs=1e-7
    )


def test_centring_a_covariate_moves_the_intercept_only(bcg: tuple) -> None:
    y, v, x = bcg
    here, there = meta_regression(y, v, x), meta_regression(y, v, x - 33.5)
    assert there.coefficients[1].estimate == pytest.approx(here.coefficients[1].estimate, rel=1e-9)
    assert there.tau2 == pytest.approx(here.tau2, rel=1e-8)
    moved = here.coefficients[0].estimate + 33.5 * here.coefficients[1].estimate
    assert there.coefficients[0].estimate == pytest.approx(moved, abs=1e-9)


def test_likelihood_with_a_maximum_at_zero_and_a_higher_one_inside_gives_the_higher_one() -> None:
    # invented trials whose likelihood falls from tau2 = 0 and rises again: a climb from 0 would stay at 0
    y = np.array([-2.637, -0.29, 0.04, 1.139, -1.651, 0.626])
    v = np.array([0.4723, 0.0158, 0.0019, 0.2584, 0.5426, 0.1848])
    x = pd.DataFrame({"x": np.arange(6)})

    def likelihood(tau2: float) -> float:
        mean = sm.WLS(y, matrix(x), weights=1 / (v + tau2)).fit().fittedvalues
        return stats.norm.logpdf(y, mean, np.sqrt(v + tau2)).sum()

    found = meta_regression(y, v, x, tau2="ml").tau2
    assert likelihood(1e-4) < likelihood(0.0) < likelihood(found)
    assert all(likelihood(t) <= likelihood(found) + 1e-8 for t in np.geomspace(1e-8, 10, 300))


@pytest.mark.parametrize(
    ("change", "options", "words"),
    [
        ({"latitude": [np.nan] + [1.0] * 12}, {}, "latitude is not a finite number"),
        ({"latitude": ["north"] + [1.0] * 12}, {}, "use a subgroup analysis"),
        ({"latitude": [1.0] * 13}, {}, "determine each other"),
        ({"latitude": [1.0] * 12}, {}, "differ in length"),
        ({}, {"tau2": "sidik-jonkman"}, "not offered with covariates"),
        ({}, {"interval": "wide"}, "interval is not a known word"),
    ],
)
def test_unusable_input_is_refused(bcg: tuple, change: dict, options: dict, words: str) -> None:
    y, v, x = bcg
    with pytest.raises(AnalysisError, match=words):
        meta_regression(y, v, change or x, **options)


def test_too_few_trials_are_refused() -> None:
    with pytest.raises(AnalysisError, match="too few trials"):
        meta_regression([0.1, 0.2], [0.1, 0.1], {"x": [1, 2]})


@pytest.mark.parametrize("method", ["reml", "ml", "paule-mandel", "dersimonian-laird", "hedges"])
@pytest.mark.parametrize("unit", [1e-8, 1e8])
def test_the_unit_of_the_effects_changes_nothing_but_the_unit(method: str, unit: float) -> None:
    y, v, x = random_trials(3)
    one = meta_regression(y, v, x, tau2=method)
    other = meta_regression(y * unit, v * unit**2, x, tau2=method)
    assert one.tau2 > 0
    found = [other.tau2 / unit**2, other.tau2_low / unit**2, other.tau2_high / unit**2, other.test_p]
    assert found == pytest.approx([one.tau2, one.tau2_low, one.tau2_high, one.test_p], rel=1e-9)
    assert np.array(estimates(other)) / unit == pytest.approx(estimates(one), rel=1e-9)


def test_a_maximum_far_below_the_largest_variance_is_found() -> None:
    # three precise trials with tau2 about 1e-9 beside two whose variances are 1e18 times theirs
    y = np.array([0.0, 4e-5, -5e-5, 2e4, -1e4])
    v = np.array([1e-10, 1.5e-10, 1e-10, 1e8, 2e8])
    x = pd.DataFrame({"x": [0.0, 0.0, 0.0, 1.0, -1.0]})
    found = meta_regression(y, v, x, tau2="ml").tau2
    grid = np.geomspace(1e-13, 1e3, 4000)

    def height(tau2: float) -> float:
        line = sm.WLS(y, sm.add_constant(x.to_numpy()), weights=1 / (v + tau2)).fit()
        return float(-0.5 * (np.sum(line.wresid**2) + np.sum(np.log(v + tau2))))

    assert 1e-10 < found < 1e-8
    assert height(found) >= max(height(t) for t in grid) - 1e-9


def test_trials_exactly_on_the_regression_leave_no_knapp_hartung_variance() -> None:
    y, v, x = [1.1, 2.2, 3.3, 4.4], [0.01, 0.02, 0.03, 0.05], {"x": [1, 2, 3, 4]}
    with pytest.raises(AnalysisError, match="exactly on the regression"):
        meta_regression(y, v, x, interval="knapp-hartung")
    assert meta_regression(y, v, x).coefficients[1].estimate == pytest.approx(1.1)


@pytest.mark.parametrize(
    ("covariates", "words"),
    [
        ({"x": [1, 2, 3, 4], "z": [1, 2]}, "equal length"),
        ({"x": 1.0}, "equal length"),
        ({"x": pd.to_datetime(["2020", "2021", None, "2023"])}, "is a date"),
        (pd.DataFrame({"x": [1, 2, 3, 5]}, index=["d", "c", "b", "a"]), "another order"),
    ],
)
def test_covariates_that_are_no_columns_of_numbers_are_refused(covariates: object, words: str) -> None:
    y = pd.Series([0.1, 0.2, 0.5, 0.3], index=list("abcd"))
    with pytest.raises(AnalysisError, match=words):
        meta_regression(y, [0.01, 0.02, 0.03, 0.05], covariates)
