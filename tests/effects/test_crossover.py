import numpy as np
import pytest
from scipy.stats import ttest_rel

from treering import effects
from treering.errors import AnalysisError


@pytest.fixture(scope="module")
def pairs():
    """Two measurements of 60 people (seeded)."""
    return np.random.default_rng(13).multivariate_normal([20, 24], [[36, 22], [22, 49]], size=60).T


def test_the_paired_mean_difference_is_that_of_the_paired_t_test(pairs):
    # SciPy, ttest_rel.
    first, second = pairs
    r = np.corrcoef(first, second)[0, 1]
    found = effects.paired_mean_difference(
        first.mean(), first.std(ddof=1), second.mean(), second.std(ddof=1), 60, correlation=r
    )
    test = ttest_rel(first, second)
    assert found["estimate"] / found["variance"] ** 0.5 == pytest.approx(test.statistic, rel=1e-10)
    assert found["sd_of_differences"] == pytest.approx((first - second).std(ddof=1), rel=1e-10)


def test_the_paired_standardized_difference_has_the_spread_it_states():
    # Seeded simulation of 6,000 crossover trials of 80 people, correlation 0.6, true difference half an SD.
    rng, r, n = np.random.default_rng(17), 0.6, 80
    data = rng.multivariate_normal([0.5, 0], [[1, r], [r, 1]], size=(6000, n)) + 3
    means, sds = data.mean(axis=1), data.std(axis=1, ddof=1)
    observed = (means[:, 0] - means[:, 1]) / np.sqrt((sds**2).mean(axis=1))
    stated = effects.paired_standardized_mean_difference(3.5, 1, 3, 1, n, correlation=r)
    assert observed.mean() == pytest.approx(stated["estimate"], rel=0.02)
    assert observed.var() == pytest.approx(stated["variance"], rel=0.08)


def test_the_paired_log_odds_ratio_has_the_spread_it_states():
    # Seeded simulation of 20,000 crossover trials of 400 people with known cell probabilities.
    cells = np.array([0.30, 0.10, 0.20, 0.40])
    draws = np.random.default_rng(19).multinomial(400, cells, size=20000) / 400
    p1, p2 = draws[:, 0] + draws[:, 1], draws[:, 0] + draws[:, 2]
    observed = np.log(p1 / (1 - p1)) - np.log(p2 / (1 - p2))
    stated = effects.paired_log_odds_ratio(*(400 * cells))
    assert stated["estimate"] == pytest.approx(np.log(0.4 / 0.6), rel=1e-12)
    assert observed.var() == pytest.approx(stated["variance"], rel=0.04)


def test_without_correlation_the_paired_log_odds_ratio_is_the_unpaired_one(counts):
    # With independent responses the covariance is zero and Woolf's variance returns.
    paired = effects.paired_log_odds_ratio(12, 28, 18, 42)
    unpaired = effects.effect_sizes(counts((40, 100, 30, 100)), "odds-ratio").iloc[0]
    assert paired["estimate"] == pytest.approx(unpaired["estimate"], rel=1e-12)
    assert paired["variance"] == pytest.approx(unpaired["variance"], rel=1e-12)


@pytest.mark.parametrize(
    ("call", "field"),
    [
        (
            lambda: effects.paired_mean_difference(1, -1, 2, 1, 20, correlation=0.5, trial="Alder"),
            "intervention_sd",
        ),
        (lambda: effects.paired_mean_difference(1, 1, 2, 1, 1, correlation=0.5, trial="Alder"), "total"),
        (
            lambda: effects.paired_mean_difference(1, 1, 2, 1, 20, correlation=1.5, trial="Alder"),
            "correlation",
        ),
        (lambda: effects.paired_log_odds_ratio(-1, 2, 3, 4, trial="Alder"), "both"),
        (lambda: effects.paired_log_odds_ratio(0, 0, 3, 4, trial="Alder"), "intervention events"),
        (
            lambda: effects.paired_log_odds_ratio(5, 0, 0, 5, trial="Alder"),
            "intervention_only, comparator_only",
        ),
    ],
)
def test_faulty_crossover_figures_are_refused(call, field):
    with pytest.raises(AnalysisError, match=f"trial Alder: {field}"):
        call()
