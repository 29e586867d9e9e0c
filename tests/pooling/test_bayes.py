"""Bayesian normal-normal results against dense two-dimensional integration, closed forms and scipy."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate, optimize, stats
from scipy.interpolate import CubicSpline

from treering.errors import AnalysisError
from treering.pooling.bayes import pool_bayesian
from treering.pooling.priors import (
    EMPIRICAL_PRIORS,
    HalfCauchy,
    HalfNormal,
    LogNormal,
    LogStudent,
    TauPrior,
    read_prior,
    tau_prior,
)

# invented log risk ratios
Y = np.array([-0.45, -0.10, 0.22, -0.71, -0.30])
V = np.array([0.040, 0.090, 0.050, 0.120, 0.020])
PRIORS = [HalfNormal(0.5), HalfCauchy(0.3), LogNormal(-1.28, 0.87), LogStudent(-1.72, 1.295, 5)]


def dense(prior: TauPrior, mid: float) -> dict[str, float]:
    """Brute force: joint density of effect and tau on a fine rectangular grid, no conditional shortcut."""
    # tau = exp(x) so that the grid is dense near 0 and still reaches far out
    x, mu = np.linspace(-40, 8, 1600), np.round(np.linspace(-12, 12, 4801), 6)
    tau = np.exp(x)
    log = prior.log_density(tau)[:, None] + x[:, None] + np.zeros(mu.size)
    for y, v in zip(Y, V, strict=True):
        sd = np.sqrt(v + tau**2)[:, None]
        log += -0.5 * ((y - mu) / sd) ** 2 - np.log(sd)
    joint = np.exp(log - log.max())
    joint /= joint.sum()
    marginal_mu, marginal_tau = joint.sum(axis=0), joint.sum(axis=1)
    below = CubicSpline(mu, marginal_mu / (mu[1] - mu[0])).antiderivative()
    cumulative_tau = CubicSpline(x, marginal_tau / (x[1] - x[0])).antiderivative()

    def quantile(p: float) -> float:
        return float(optimize.brentq(lambda value: below(value) - p, -11, 11))

    def tau_quantile(p: float) -> float:
        return math.exp(optimize.brentq(lambda value: cumulative_tau(value) - p, -40, 8))

    mean = float(marginal_mu @ mu)
    return {
        "estimate": quantile(0.5),
        "ci_low": quantile(0.025),
        "ci_high": quantile(0.975),
        "standard_deviation": math.sqrt(float(marginal_mu @ (mu - mean) ** 2)),
        "tau_median": tau_quantile(0.5),
        "tau_high": tau_quantile(0.975),
        "p_below_zero": float(below(0.0)),
        "p_beyond_mid": float(below(-mid)),
        "p_next_benefit": float(np.sum(joint * stats.norm.cdf((0.0 - mu[None, :]) / tau[:, None]))),
        "p_next_beyond_mid": float(np.sum(joint * stats.norm.cdf((-mid - mu[None, :]) / tau[:, None]))),
    }


@pytest.mark.parametrize("prior", PRIORS, ids=lambda prior: prior.describe())
def test_posterior_agrees_with_dense_two_dimensional_integration(prior: TauPrior) -> None:
    found = pool_bayesian(Y, V, prior, better="lower", mid=0.15)
    for name, expected in dense(prior, 0.15).items():
        assert getattr(found, name) == pytest.approx(expected, abs=5e-6), name


@pytest.mark.parametrize("prior", PRIORS, ids=lambda prior: prior.describe())
def test_tau_quantiles_agree_with_adaptive_integration_over_tau(prior: TauPrior) -> None:
    found = pool_bayesian(Y, V, prior)

    def density(x: float) -> float:
        tau = math.exp(x)
        w = 1 / (V + tau**2)
        centre = w @ Y / w.sum()
        log = 0.5 * np.log(w).sum() - 0.5 * math.log(w.sum()) - 0.5 * w @ (Y - centre) ** 2
        return math.exp(log + float(prior.log_density(np.array(tau))) + x)

    cut = math.log(found.tau_median)
    below = integrate.quad(density, -40, cut, limit=500, epsabs=1e-14)[0]
    above = integrate.quad(density, cut, 40, limit=500, epsabs=1e-14)[0]
    assert below / (below + above) == pytest.approx(0.5, abs=1e-6)


def test_known_tau_gives_the_closed_form() -> None:
    tau = 0.3
    w = 1 / (V + tau**2)
    mean, sd = w @ Y / w.sum(), w.sum() ** -0.5
    found = pool_bayesian(Y, V, LogNormal(math.log(tau), 1e-5), mid=0.1)
    assert found.estimate == pytest.approx(mean, abs=1e-8)
    assert found.standard_deviation == pytest.approx(sd, abs=1e-8)
    assert found.ci_low == pytest.approx(stats.norm.ppf(0.025, mean, sd), abs=1e-8)
    assert found.p_beyond_mid == pytest.approx(stats.norm.cdf(-0.1, mean, sd), abs=1e-8)
    assert found.next_high == pytest.approx(stats.norm.ppf(0.975, mean, math.hypot(sd, tau)), abs=1e-7)
    assert found.tau_median == pytest.approx(tau, abs=1e-6)


def test_known_tau_with_a_normal_effect_prior_is_the_conjugate_update() -> None:
    tau, centre, spread = 0.2, -0.1, 0.4
    w = 1 / (V + tau**2)
    precision = w.sum() + spread**-2
    mean = (w @ Y + centre * spread**-2) / precision
    found = pool_bayesian(Y, V, LogNormal(math.log(tau), 1e-5), effect_prior=(centre, spread))
    assert found.estimate == pytest.approx(mean, abs=1e-8)
    assert found.standard_deviation == pytest.approx(precision**-0.5, abs=1e-8)


def test_one_trial_leaves_tau_at_its_prior() -> None:
    # with a flat effect prior one trial says nothing on tau
    found = pool_bayesian([0.1], [0.04], HalfNormal(0.5))
    assert found.tau_median == pytest.approx(stats.halfnorm.ppf(0.5, scale=0.5), abs=1e-7)
    assert found.tau_high == pytest.approx(stats.halfnorm.ppf(0.975, scale=0.5), abs=1e-6)


def test_a_posterior_without_a_variance_says_so() -> None:
    # half-Cauchy tail tau^-2 times the flat-prior likelihood tail tau^-(k-1): no second moment for k = 2
    assert math.isinf(pool_bayesian(Y[:2], V[:2], HalfCauchy(0.5)).standard_deviation)
    assert math.isfinite(pool_bayesian(Y[:3], V[:3], HalfCauchy(0.5)).standard_deviation)


def test_turning_the_sign_turns_the_posterior() -> None:
    here = pool_bayesian(Y, V, HalfNormal(0.5), better="lower", mid=0.1)
    there = pool_bayesian(-Y, V, HalfNormal(0.5), better="higher", mid=0.1)
    assert there.ci_high == pytest.approx(-here.ci_low, abs=1e-10)
    for name in ("p_benefit", "p_beyond_mid", "p_harm_beyond_mid", "p_next_benefit", "p_next_beyond_mid"):
        assert getattr(there, name) == pytest.approx(getattr(here, name), abs=1e-12), name


def test_changing_the_unit_changes_only_the_unit() -> None:
    here = pool_bayesian(Y, V, HalfNormal(0.5), mid=0.1)
    there = pool_bayesian(1000 * Y, 1e6 * V, HalfNormal(500.0), mid=100.0)
    assert there.ci_low == pytest.approx(1000 * here.ci_low, rel=1e-9)
    assert there.tau_high == pytest.approx(1000 * here.tau_high, rel=1e-9)
    assert there.p_beyond_mid == pytest.approx(here.p_beyond_mid, abs=1e-10)


def test_many_trials_are_integrated_to_the_same_value_as_by_quad() -> None:
    rng = np.random.default_rng(7)
    y, v = rng.normal(0.2, 0.3, 400), rng.uniform(0.01, 0.05, 400)

    def log_likelihood(tau: float) -> float:
        w = 1 / (v + tau**2)
        centre = w @ y / w.sum()
        return float(0.5 * np.log(w).sum() - 0.5 * math.log(w.sum()) - 0.5 * w @ (y - centre) ** 2)

    peak = optimize.minimize_scalar(lambda t: -log_likelihood(t), bounds=(0.1, 0.6), method="bounded")

    def weight(tau: float) -> float:
        return math.exp(log_likelihood(tau) + peak.fun) * stats.halfnorm.pdf(tau, scale=0.5)

    total = integrate.quad(weight, 0.1, 0.6, points=[peak.x], epsabs=1e-13)[0]
    found = pool_bayesian(y, v, HalfNormal(0.5))
    below = integrate.quad(weight, 0.1, found.tau_high, points=[peak.x], epsabs=1e-13)[0]
    assert below / total == pytest.approx(0.975, abs=1e-6)


@pytest.mark.parametrize("prior", [*PRIORS, *(entry.prior for entry in EMPIRICAL_PRIORS.values())])
def test_every_prior_is_a_proper_distribution_with_matching_quantiles(prior: TauPrior) -> None:
    median = float(prior.quantile(np.array(0.5)))

    def density(x: float) -> float:
        return math.exp(float(prior.log_density(np.array(math.exp(x)))) + x)

    below = integrate.quad(density, -80, math.log(median), limit=500)[0]
    above = integrate.quad(density, math.log(median), 80, limit=500)[0]
    assert below == pytest.approx(0.5, abs=1e-5)
    assert above == pytest.approx(0.5, abs=1e-5)


def test_published_priors_are_halved_from_tau_squared_to_tau() -> None:
    # Turner et al. 2012: log(tau squared) normal, mean -2.56, SD 1.74 (from memory): the median of tau
    # squared is exp(-2.56) = 0.077 and its upper 97.5% point exp(-2.56 + 1.96 x 1.74) = 2.34
    prior = EMPIRICAL_PRIORS["turner-2012-any-outcome"].prior
    assert float(prior.quantile(np.array(0.5))) ** 2 == pytest.approx(math.exp(-2.56), rel=1e-9)
    assert float(prior.quantile(np.array(0.975))) ** 2 == pytest.approx(2.34, abs=0.01)


def test_every_published_prior_names_its_source_and_that_it_is_from_memory() -> None:
    for name, entry in EMPIRICAL_PRIORS.items():
        assert entry.source.split()[0].strip(",").lower() in name
        assert entry.from_memory


@pytest.mark.parametrize(
    ("name", "parameters", "words"),
    [
        ("half-normal", {}, "takes other parameters"),
        ("log-normal", {"scale": 1.0}, "takes other parameters"),
        ("turner-2012-any-outcome", {"scale": 1.0}, "takes other parameters"),
        ("uniform", {"scale": 1.0}, "Unknown prior"),
        ("half-cauchy", {"scale": -1.0}, "scale must be above 0"),
    ],
)
def test_priors_that_make_no_sense_are_refused(name: str, parameters: dict[str, float], words: str) -> None:
    with pytest.raises(AnalysisError, match=words):
        tau_prior(name, **parameters)


def test_a_bad_variance_names_its_trial() -> None:
    with pytest.raises(AnalysisError, match="trial 2"):
        pool_bayesian([0.1, 0.2], [0.04, -0.1], HalfNormal(0.5))


@pytest.mark.parametrize(
    "options", [{"mid": -0.1}, {"effect_prior": (0.0, 0.0)}, {"better": "sideways"}, {"level": 2}]
)
def test_unusable_options_are_refused(options: dict[str, object]) -> None:
    with pytest.raises(AnalysisError):
        pool_bayesian(Y, V, HalfNormal(0.5), **options)


@pytest.mark.parametrize(
    ("words", "prior"),
    [
        ("half-normal 0.5", HalfNormal(0.5)),
        ("half-cauchy 1", HalfCauchy(1.0)),
        ("log-normal -1.28 0.87", LogNormal(-1.28, 0.87)),
        ("turner-2012-any-outcome", "turner-2012-any-outcome"),
    ],
)
def test_a_prior_can_be_written_out(words: str, prior: object) -> None:
    assert read_prior(words) == prior


@pytest.mark.parametrize(
    "words", ["", "flat", "half-normal", "half-normal x", "half-normal 1 2", "log-normal 1"]
)
def test_words_that_are_no_prior_are_refused(words: str) -> None:
    with pytest.raises(AnalysisError):
        read_prior(words)
