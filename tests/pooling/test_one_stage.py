"""One-stage models against direct integration with SciPy, mpmath, and identities of the models."""

from __future__ import annotations

import json
from pathlib import Path

import mpmath
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, optimize, stats
from scipy.special import expit, gammaln, logsumexp

from treering.errors import AnalysisError, NotConvergedError
from treering.pooling.hypergeometric import conditional_tables, log_pmf
from treering.pooling.one_stage import OneStageEffect, pool_one_stage
from treering.pooling.one_stage_models import OneStageModel

COLUMNS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]
PUBLISHED = Path(__file__).parents[1] / "published"
HYPERGEOMETRIC, FIXED = OneStageModel.HYPERGEOMETRIC_NORMAL, OneStageModel.BINOMIAL_NORMAL_FIXED
RANDOM, BETA = OneStageModel.BINOMIAL_NORMAL_RANDOM, OneStageModel.BETA_BINOMIAL

# invented counts with clear heterogeneity, single zeros and a double zero
MIXED = [
    [0, 120, 5, 118], [9, 210, 4, 205], [2, 80, 11, 83], [12, 150, 3, 149],
    [1, 60, 6, 61], [0, 45, 0, 44], [7, 300, 9, 310], [0, 90, 3, 88],
]  # fmt: skip


def counts(rows: list[list[int]]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=COLUMNS)


@pytest.fixture(scope="module")
def mixed() -> pd.DataFrame:
    return counts(MIXED)


@pytest.fixture(scope="module")
def rosiglitazone() -> pd.DataFrame:
    return counts(json.loads((PUBLISHED / "rosiglitazone_cardiovascular_death.json").read_text())["rows"])


@pytest.fixture(scope="module")
def fits(mixed: pd.DataFrame) -> dict[OneStageModel, OneStageEffect]:
    return {model: pool_one_stage(mixed, model) for model in OneStageModel}


@pytest.mark.parametrize("row", [[3, 20, 1, 25], [0, 40, 2, 17], [9, 12, 4, 30]])
@pytest.mark.parametrize("log_odds_ratio", [-2.5, 0.0, 1.3])
def test_conditional_probability_agrees_with_fifty_digit_arithmetic(
    row: list[int], log_odds_ratio: float
) -> None:
    a, n1, c, n2 = row
    with mpmath.workdps(50):
        psi, t = mpmath.exp(mpmath.mpf(log_odds_ratio)), a + c

        def term(x: int) -> mpmath.mpf:
            return mpmath.binomial(n1, x) * mpmath.binomial(n2, t - x) * psi**x

        expected = mpmath.log(term(a) / mpmath.fsum(term(x) for x in range(max(0, t - n2), min(n1, t) + 1)))
    assert log_pmf(a, n1, c, n2, log_odds_ratio)[0] == pytest.approx(float(expected), abs=1e-11)


def test_conditional_probability_agrees_with_scipy() -> None:
    # scipy.stats.nchypergeom_fisher(M, n, N, odds): n events in M people, N drawn
    expected = stats.nchypergeom_fisher(300, 17, 140, np.exp(0.7)).logpmf(11)
    assert log_pmf(11, 140, 6, 160, 0.7)[0] == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize("log_odds_ratio", [-25.0, -3.0, -0.2, 0.0, 1.4, 25.0])
def test_mega_trials_beside_small_ones_keep_every_table_that_matters(log_odds_ratio: float) -> None:
    # the whole support summed by scipy.special.logsumexp; arms of 100 000, at odds ratios near and far
    rows = np.array([[4300, 100_000, 4700, 100_000], [60_000, 99_000, 61_000, 100_000], [2, 30, 0, 31]])
    theta = np.full((3, 1, 1), log_odds_ratio)
    value, gradient, hessian = conditional_tables(*rows.T).derivatives(theta)
    for i, (a, n1, c, n2) in enumerate(rows):
        x = np.arange(max(0, a + c - n2), min(n1, a + c) + 1)
        log = -gammaln(x + 1) - gammaln(n1 - x + 1) - gammaln(a + c - x + 1) - gammaln(n2 - a - c + x + 1)
        log += log_odds_ratio * x
        log -= logsumexp(log)
        # distances from the count seen, so that the reference loses no digits of its own
        mean = np.exp(log) @ (x - a)
        assert value[i, 0] == pytest.approx(log[a - x[0]], rel=1e-8, abs=1e-8)
        assert gradient[i, 0, 0] == pytest.approx(-mean, rel=1e-7, abs=1e-6)
        assert hessian[i, 0, 0, 0] == pytest.approx(-np.exp(log) @ (x - a - mean) ** 2, rel=1e-6, abs=1e-6)


def conditional_by_quad(rows: list[list[int]], mean: float, tau2: float) -> float:
    """Integrate every trial's conditional likelihood with scipy.integrate.quad."""
    total = 0.0
    for a, n1, c, n2 in rows:
        if a + c == 0:
            continue

        def integrand(u: float, row: tuple[int, ...] = (a, n1, c, n2)) -> float:
            return float(np.exp(log_pmf(*row, mean + np.sqrt(tau2) * u)[0]) * stats.norm.pdf(u))

        total += np.log(integrate.quad(integrand, -12, 12, epsabs=1e-13, limit=200)[0])
    return total


def test_conditional_likelihood_at_the_optimum_agrees_with_direct_integration(
    fits: dict[OneStageModel, OneStageEffect],
) -> None:
    fit = fits[HYPERGEOMETRIC]
    assert fit.tau2 is not None
    assert fit.tau2 > 0.5
    assert fit.log_likelihood == pytest.approx(conditional_by_quad(MIXED, fit.estimate, fit.tau2), abs=1e-6)


def conditional_on_a_grid(mean: float, tau: float) -> float:
    """Same integral by the trapezoidal rule on 2001 points."""
    u, total = np.linspace(-10, 10, 2001), 0.0
    for row in MIXED:
        columns = [np.full(u.shape, value) for value in row]
        total += np.log(np.sum(np.exp(log_pmf(*columns, mean + tau * u)) * stats.norm.pdf(u)) * 0.01)
    return float(total)


def test_conditional_optimum_is_the_optimum_of_direct_integration(
    fits: dict[OneStageModel, OneStageEffect],
) -> None:
    fit = fits[HYPERGEOMETRIC]
    found = optimize.minimize(
        lambda x: -conditional_on_a_grid(x[0], x[1]), [0.0, 0.7], method="Nelder-Mead",
        options={"xatol": 1e-5, "fatol": 1e-10},
    )  # fmt: skip
    assert fit.estimate == pytest.approx(found.x[0], abs=1e-4)
    assert fit.tau2 == pytest.approx(found.x[1] ** 2, abs=3e-4)


def binomials(row: list[int], intercept: float, theta: float) -> float:
    a, n1, c, n2 = row
    return float(
        stats.binom.pmf(a, n1, expit(intercept + theta / 2))
        * stats.binom.pmf(c, n2, expit(intercept - theta / 2))
    )


def test_fixed_intercept_likelihood_agrees_with_direct_integration_and_profiling(
    fits: dict[OneStageModel, OneStageEffect],
) -> None:
    fit, total = fits[FIXED], 0.0
    for row in MIXED:
        if row[0] + row[2] == 0:
            continue

        def negative(intercept: float, row: list[int] = row) -> float:
            def integrand(u: float) -> float:
                return binomials(row, intercept, fit.estimate + np.sqrt(fit.tau2) * u) * stats.norm.pdf(u)

            return -np.log(integrate.quad(integrand, -10, 10, epsabs=1e-14, limit=200)[0])

        total -= optimize.minimize_scalar(
            negative, bounds=(-9, 0), method="bounded", options={"xatol": 1e-8}
        ).fun
    assert fit.log_likelihood == pytest.approx(total, abs=1e-6)


def test_random_intercept_likelihood_agrees_with_a_dense_two_dimensional_grid(
    fits: dict[OneStageModel, OneStageEffect],
) -> None:
    fit, total = fits[RANDOM], 0.0
    u = np.linspace(-8, 8, 801)
    weight = stats.norm.pdf(u) * (u[1] - u[0])
    assert fit.intercept is not None
    assert fit.intercept_variance is not None
    intercept = (fit.intercept + np.sqrt(fit.intercept_variance) * u)[:, None]
    theta = (fit.estimate + np.sqrt(fit.tau2) * u)[None, :]
    for a, n1, c, n2 in MIXED:
        density = stats.binom.pmf(a, n1, expit(intercept + theta / 2)) * stats.binom.pmf(
            c, n2, expit(intercept - theta / 2)
        )
        total += np.log(weight @ density @ weight)
    # the trapezoidal rule is exact to rounding for such smooth, fast-falling integrands
    assert fit.log_likelihood == pytest.approx(total, abs=2e-5)


def test_beta_binomial_likelihood_agrees_with_scipy(fits: dict[OneStageModel, OneStageEffect]) -> None:
    fit = fits[BETA]
    assert fit.correlation is not None
    table = np.array(MIXED)

    def negative(x: np.ndarray) -> float:
        s, total = np.exp(x[2]), 0.0
        for column, eta in ((0, x[0] + x[1]), (2, x[0])):
            p = expit(eta)
            total += stats.betabinom.logpmf(table[:, column], table[:, column + 1], p * s, (1 - p) * s).sum()
        return -total

    found = optimize.minimize(
        negative, [-3.0, 0.0, 3.0], method="Nelder-Mead", options={"xatol": 1e-8, "fatol": 1e-12}
    )
    assert fit.log_likelihood == pytest.approx(-found.fun, abs=1e-7)
    assert fit.estimate == pytest.approx(found.x[1], abs=1e-5)
    assert fit.correlation == pytest.approx(1 / (1 + np.exp(found.x[2])), abs=1e-6)


def test_beta_binomial_standard_error_is_that_of_the_numerical_hessian(mixed: pd.DataFrame) -> None:
    fit = pool_one_stage(mixed, BETA)
    table, s = np.array(MIXED), 1 / fit.correlation - 1

    def negative(x: np.ndarray) -> float:
        total = 0.0
        for column, eta in ((0, x[0] + x[1]), (2, x[0])):
            p, size = expit(eta), np.exp(x[2])
            total += stats.betabinom.logpmf(
                table[:, column], table[:, column + 1], p * size, (1 - p) * size
            ).sum()
        return -total

    # comparator logit is not reported: recover it by one-dimensional search
    start = optimize.minimize_scalar(lambda b: negative(np.array([b, fit.estimate, np.log(s)]))).x
    x, h = np.array([start, fit.estimate, np.log(s)]), 1e-4
    steps = np.eye(3) * h
    hessian = [
        [
            (negative(x + i + j) - negative(x + i - j) - negative(x - i + j) + negative(x - i - j))
            / (4 * h * h)
            for j in steps
        ]
        for i in steps
    ]
    assert fit.standard_error == pytest.approx(np.sqrt(np.linalg.inv(np.array(hessian))[1, 1]), rel=1e-4)


def test_beta_binomial_without_extra_variation_is_the_crude_table() -> None:
    # closed form: Woolf's variance of the summed table
    fit = pool_one_stage(counts([[5, 100, 10, 100], [5, 100, 10, 100], [5, 100, 10, 100]]), BETA)
    assert fit.correlation == 0.0
    assert fit.estimate == pytest.approx(np.log(15 * 270 / (285 * 30)), abs=1e-7)
    assert fit.standard_error == pytest.approx(np.sqrt(1 / 15 + 1 / 285 + 1 / 30 + 1 / 270), rel=1e-5)


@pytest.mark.parametrize(
    ("measure", "expected", "error"),
    [
        ("risk-ratio", np.log(0.5), np.sqrt(1 / 15 - 1 / 300 + 1 / 30 - 1 / 300)),
        ("risk-difference", -0.05, np.sqrt(0.05 * 0.95 / 300 + 0.1 * 0.9 / 300)),
    ],
)
def test_beta_binomial_gives_risk_ratio_and_difference(measure: str, expected: float, error: float) -> None:
    # closed forms of the summed table (Katz et al. 1978 for the log risk ratio)
    rows = [[5, 100, 10, 100]] * 3
    fit = pool_one_stage(counts(rows), BETA, measure=measure)
    assert fit.estimate == pytest.approx(expected, abs=1e-7)
    assert fit.standard_error == pytest.approx(error, rel=1e-5)


def test_one_homogeneous_table_gives_its_own_odds_ratio_when_tau2_is_zero() -> None:
    # closed form: the maximum-likelihood odds ratio of two binomials is the crude one, variance Woolf's
    fit = pool_one_stage(counts([[5, 100, 10, 120]]), FIXED)
    assert fit.tau2 == 0.0
    assert fit.estimate == pytest.approx(np.log(5 * 110 / (95 * 10)), abs=1e-6)
    assert fit.standard_error == pytest.approx(np.sqrt(1 / 5 + 1 / 95 + 1 / 10 + 1 / 110), rel=1e-5)


def test_homogeneous_conditional_fit_solves_the_exact_score_equation() -> None:
    # with tau2 = 0 the conditional estimate equates observed and expected events, variance 1 / sum of
    # variances; means and variances from scipy.stats.nchypergeom_fisher
    rows = [[4, 30, 7, 31], [2, 25, 5, 27], [6, 40, 9, 41]]

    def distributions(theta: float) -> list[object]:
        return [stats.nchypergeom_fisher(n1 + n2, a + c, n1, np.exp(theta)) for a, n1, c, n2 in rows]

    expected = optimize.brentq(lambda x: sum(d.mean() for d in distributions(x)) - 12, -3, 3, xtol=1e-12)
    fit = pool_one_stage(counts(rows), HYPERGEOMETRIC)
    assert fit.tau2 == 0.0
    assert fit.estimate == pytest.approx(expected, abs=1e-7)
    variance = 1 / sum(d.var() for d in distributions(expected))
    assert fit.standard_error == pytest.approx(np.sqrt(variance), rel=1e-6)


def test_double_zero_trials_add_nothing_where_the_trial_is_conditioned_or_profiled(
    rosiglitazone: pd.DataFrame,
) -> None:
    some_event = (rosiglitazone["intervention_events"] + rosiglitazone["comparator_events"]) > 0
    for model in (HYPERGEOMETRIC, FIXED):
        everyone = pool_one_stage(rosiglitazone, model)
        assert (everyone.k, everyone.k_informative, everyone.k_double_zero) == (42, 23, 19)
        alone = pool_one_stage(rosiglitazone[some_event], model)
        assert everyone.estimate == pytest.approx(alone.estimate, abs=1e-9)


def test_double_zero_trials_count_where_intercepts_or_risks_are_random(rosiglitazone: pd.DataFrame) -> None:
    some_event = (rosiglitazone["intervention_events"] + rosiglitazone["comparator_events"]) > 0
    for model in (RANDOM, BETA):
        everyone, alone = (
            pool_one_stage(rosiglitazone, model),
            pool_one_stage(rosiglitazone[some_event], model),
        )
        assert everyone.k_informative == 42
        assert abs(everyone.estimate - alone.estimate) > 0.005


def test_conditional_estimate_lies_near_the_published_peto_odds_ratio(rosiglitazone: pd.DataFrame) -> None:
    # Nissen and Wolski 2007: Peto odds ratio 1.64 (0.98 to 2.74); both condition on the margins and no
    # heterogeneity is found, so they differ only by Peto's one-step approximation
    fit = pool_one_stage(rosiglitazone, HYPERGEOMETRIC)
    assert fit.tau2 == 0.0
    assert np.exp(fit.estimate) == pytest.approx(1.64, abs=0.05)
    assert np.exp(fit.ci_low) == pytest.approx(0.98, abs=0.02)


def test_profile_likelihood_interval_ends_where_the_likelihood_ratio_says(
    mixed: pd.DataFrame, fits: dict[OneStageModel, OneStageEffect]
) -> None:
    fit = pool_one_stage(mixed, HYPERGEOMETRIC, interval="profile-likelihood")
    for end in (fit.ci_low, fit.ci_high):
        best = optimize.minimize_scalar(
            lambda tau, end=end: -conditional_on_a_grid(end, tau), bounds=(0.01, 4), method="bounded"
        )
        assert 2 * (fit.log_likelihood + best.fun) == pytest.approx(3.841459, abs=1e-3)
    wald = fits[HYPERGEOMETRIC]
    assert fit.ci_high - fit.ci_low > wald.ci_high - wald.ci_low


@pytest.mark.parametrize("model", list(OneStageModel))
def test_swapping_the_arms_turns_the_sign(
    model: OneStageModel, fits: dict[OneStageModel, OneStageEffect]
) -> None:
    swapped = pool_one_stage(counts([[c, n2, a, n1] for a, n1, c, n2 in MIXED]), model)
    assert swapped.estimate == pytest.approx(-fits[model].estimate, abs=2e-5)
    assert swapped.standard_error == pytest.approx(fits[model].standard_error, rel=1e-3)


@given(order=st.permutations(range(len(MIXED))))
@settings(max_examples=8, deadline=None)
def test_the_order_of_the_trials_does_not_matter(order: list[int]) -> None:
    there, back = counts(MIXED), counts([MIXED[i] for i in order])
    first, second = pool_one_stage(there, HYPERGEOMETRIC), pool_one_stage(back, HYPERGEOMETRIC)
    assert first.estimate == pytest.approx(second.estimate, abs=1e-6)


def test_the_likelihood_holds_its_constants() -> None:
    # one trial, fitted perfectly: the product of two binomials at their own risks
    fit = pool_one_stage(counts([[5, 100, 10, 120]]), FIXED)
    expected = stats.binom.logpmf(5, 100, 0.05) + stats.binom.logpmf(10, 120, 10 / 120)
    assert fit.log_likelihood == pytest.approx(expected, abs=1e-8)


@pytest.mark.slow
def test_simulated_trials_give_back_the_true_odds_ratio() -> None:
    # seeded simulation: 40 trials, log odds ratio -0.5, tau 0.4, risks near 3%
    rng, found = np.random.default_rng(20240601), {model: [] for model in (HYPERGEOMETRIC, FIXED, RANDOM)}
    for _ in range(60):
        intercept, theta = rng.normal(-3.5, 0.6, 40), rng.normal(-0.5, 0.4, 40)
        total = rng.integers(80, 300, 40)
        a, c = (
            rng.binomial(total, expit(intercept + theta / 2)),
            rng.binomial(total, expit(intercept - theta / 2)),
        )
        table = pd.DataFrame(dict(zip(COLUMNS, (a, total, c, total), strict=True)))
        for model, values in found.items():
            values.append(pool_one_stage(table, model).estimate)
    for model, values in found.items():
        error = np.std(values) / np.sqrt(len(values))
        assert np.mean(values) == pytest.approx(-0.5, abs=4 * error + 0.02), model


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ([[5, 4, 1, 10]], "intervention_events: is above intervention_total"),
        ([[1, 10, -1, 10]], "comparator_events: is below zero"),
        ([[1, 10, 1, 0]], "comparator_total: is not above zero"),
        ([[1.5, 10, 1, 10]], "intervention_events: is not a whole number"),
        ([[np.nan, 10, 1, 10]], "intervention_events: is missing"),
    ],
)
def test_bad_counts_are_refused_with_trial_and_field(rows: list[list[float]], words: str) -> None:
    table = pd.DataFrame(rows, columns=COLUMNS).assign(trial="Ashdown")
    with pytest.raises(AnalysisError, match=words) as refusal:
        pool_one_stage(table, HYPERGEOMETRIC)
    assert refusal.value.trial == "Ashdown"


def test_effective_numbers_of_cluster_trials_are_fractions_the_binomial_models_take() -> None:
    table = pd.DataFrame([[4.5, 80.2, 9.1, 82.0], [3.0, 60.0, 5.0, 61.0]], columns=COLUMNS)
    assert pool_one_stage(table, BETA).estimate < 0


@pytest.mark.parametrize("model", list(OneStageModel))
def test_an_arm_without_any_event_has_no_finite_estimate(model: OneStageModel) -> None:
    with pytest.raises(AnalysisError, match="no event in the intervention arm"):
        pool_one_stage(counts([[0, 50, 3, 50], [0, 40, 2, 41]]), model)


def test_only_double_zero_trials_say_so() -> None:
    with pytest.raises(AnalysisError, match="nothing to estimate"):
        pool_one_stage(counts([[0, 50, 0, 50]]), HYPERGEOMETRIC)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"model": "magic"}, "model is not a known word"),
        ({"measure": "risk-ratio"}, "has no such measure"),
        ({"interval": "guess"}, "Unknown interval"),
        ({"level": 1.0}, "level"),
    ],
)
def test_unknown_options_are_refused(mixed: pd.DataFrame, options: dict[str, object], words: str) -> None:
    with pytest.raises(AnalysisError, match=words):
        pool_one_stage(mixed, **options)


@pytest.mark.parametrize("seed", [2, 3, 13, 84])
def test_wide_heterogeneity_leaves_no_intercept_unsettled(seed: int) -> None:
    # seeded trials on which a plain Newton search for the intercepts once ran in circles
    rng = np.random.default_rng(seed)
    k = int(rng.integers(2, 25))
    intercept = rng.normal(rng.uniform(-7, -1), rng.uniform(0, 1.5), k)
    theta = rng.normal(rng.normal(), rng.uniform(0, 1.5), k)
    n1, n2 = rng.integers(5, 800, k), rng.integers(5, 800, k)
    a, c = rng.binomial(n1, expit(intercept + theta / 2)), rng.binomial(n2, expit(intercept - theta / 2))
    table = pd.DataFrame(dict(zip(COLUMNS, (a, n1, c, n2), strict=True)))
    profiled, conditional = pool_one_stage(table, FIXED), pool_one_stage(table, HYPERGEOMETRIC)
    assert profiled.estimate == pytest.approx(conditional.estimate, abs=0.5 * conditional.standard_error)


def test_a_sea_of_double_zero_trials_is_integrated_with_as_many_nodes_as_it_needs() -> None:
    rows = [[0, 100, 0, 100]] * 55 + [
        [2, 100, 1, 90], [0, 80, 3, 85], [4, 100, 5, 100], [1, 60, 0, 60], [0, 100, 2, 100],
    ]  # fmt: skip
    fit = pool_one_stage(counts(rows), RANDOM)
    assert fit.intercept is not None
    assert fit.intercept_variance is not None
    assert fit.tau2 == 0.0
    # intercepts 3.7 wide against one-sided trials: eleven nodes put the log-likelihood 0.2 off
    mean, sd = fit.intercept, fit.intercept_variance**0.5
    grid = np.linspace(mean - 10 * sd, mean + 10 * sd, 4001)
    total = 0.0
    for a, n1, c, n2 in rows:
        log = stats.binom.logpmf(a, n1, expit(grid + fit.estimate / 2))
        log += stats.binom.logpmf(c, n2, expit(grid - fit.estimate / 2))
        total += float(np.log(integrate.simpson(np.exp(log) * stats.norm.pdf(grid, mean, sd), x=grid)))
    assert fit.log_likelihood == pytest.approx(total, abs=5e-3)
    # maximum of that grid likelihood by Nelder-Mead: log odds ratio -0.472
    assert fit.estimate == pytest.approx(-0.472, abs=2e-3)


@pytest.mark.parametrize("model", [HYPERGEOMETRIC, BETA])
def test_a_variation_without_limit_is_refused_and_not_reported_at_the_limit_of_the_search(
    model: OneStageModel,
) -> None:
    # everyone on one side had the event in one trial, nobody in the other: the likelihood climbs for ever
    with pytest.raises(NotConvergedError, match="no finite estimate"):
        pool_one_stage(counts([[20, 20, 0, 20], [0, 20, 20, 20]]), model)
