"""Adaptive quadrature against the closed form of normal likelihoods, and the beta-binomial against mpmath."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from treering.errors import NotConvergedError
from treering.pooling.beta_binomial import problem
from treering.pooling.binomial import Arms
from treering.pooling.likelihood_fit import Problem, maximise
from treering.pooling.quadrature import Derivatives, marginal


def normal_likelihood(y: np.ndarray, v: np.ndarray):
    """Log-likelihood of y given theta, normal with variance v: the integral has a closed form."""

    def evaluate(theta: np.ndarray) -> Derivatives:
        gap = y[:, None] - theta[..., 0]
        value = stats.norm.logpdf(gap, scale=np.sqrt(v)[:, None])
        hessian = np.broadcast_to(-1 / v[:, None], gap.shape)
        return value, (gap / v[:, None])[..., None], hessian[..., None, None]

    return evaluate


@given(mean=st.floats(-2, 2), tau2=st.floats(0, 4), nodes=st.integers(1, 15))
@settings(max_examples=40, deadline=None)
def test_normal_likelihoods_are_integrated_exactly_with_any_number_of_nodes(
    mean: float, tau2: float, nodes: int
) -> None:
    y, v = np.array([0.3, -1.2, 2.0]), np.array([0.1, 0.5, 1.5])
    found = marginal(normal_likelihood(y, v), np.array([mean]), np.array([tau2]), k=3, nodes=nodes)
    assert found.log == pytest.approx(stats.norm.logpdf(y, mean, np.sqrt(v + tau2)), abs=1e-10)


@given(mean=st.floats(-2, 2), tau2=st.floats(0, 4))
@settings(max_examples=40, deadline=None)
def test_derivatives_are_those_of_the_closed_form_also_at_variance_zero(mean: float, tau2: float) -> None:
    y, v = np.array([0.3, -1.2, 2.0]), np.array([0.1, 0.5, 1.5])
    found = marginal(normal_likelihood(y, v), np.array([mean]), np.array([tau2]), k=3, nodes=7)
    spread = v + tau2
    assert found.gradient_mean[:, 0] == pytest.approx((y - mean) / spread, abs=1e-8)
    expected = 0.5 * ((y - mean) ** 2 / spread**2 - 1 / spread)
    assert found.gradient_variance[:, 0] == pytest.approx(expected, abs=1e-7)


def test_a_fit_of_normal_trials_is_the_closed_form_maximum() -> None:
    # equal variances: mean and tau2 = mean square - v, by hand
    y, v = np.array([0.1, 0.9, -0.4, 1.6]), np.full(4, 0.2)
    evaluate = normal_likelihood(y, v)

    def objective(x: np.ndarray) -> tuple[float, np.ndarray]:
        found = marginal(evaluate, x[:1], x[1:], k=4, nodes=5)
        gradient = np.array([found.gradient_mean.sum(), found.gradient_variance.sum()])
        return float(found.log.sum()), gradient

    fit = maximise(
        Problem(objective, (np.array([0.0, 0.1]),), np.array([-9.0, 0.0]), np.array([9.0, 9.0]), (1,))
    )
    assert fit.x == pytest.approx([y.mean(), y.var() - 0.2], abs=1e-6)
    assert fit.covariance[0, 0] == pytest.approx(y.var() / 4, rel=1e-4)
    assert fit.covariance[1, 1] == pytest.approx(2 * y.var() ** 2 / 4, rel=1e-3)


def test_a_likelihood_without_curvature_is_no_maximum() -> None:
    flat = Problem(lambda x: (0.0, np.zeros(1)), (np.array([0.0]),), np.array([-1.0]), np.array([1.0]), ())
    with pytest.raises(NotConvergedError, match="no proper maximum"):
        maximise(flat)


@pytest.mark.parametrize("precision", [0.5, 40.0, 9e3, 1.1e4, 1e7])
def test_beta_binomial_keeps_its_digits_from_strong_to_hardly_any_variation(precision: float) -> None:
    arms = Arms(*(np.array([value], dtype=float) for value in (3, 2500, 7, 1800)))
    value, _ = problem(arms, correlated=True).objective(np.array([-5.0, -0.4, np.log(precision)]))
    with mpmath.workdps(60):
        total = mpmath.mpf(0)
        for events, people, eta in ((3, 2500, -5.4), (7, 1800, -5.0)):
            p = 1 / (1 + mpmath.exp(-mpmath.mpf(eta)))
            s = mpmath.exp(mpmath.mpf(float(np.log(precision))))
            total += mpmath.log(
                mpmath.beta(p * s + events, (1 - p) * s + people - events) / mpmath.beta(p * s, (1 - p) * s)
            )
    assert value == pytest.approx(float(total), rel=1e-8)


@given(x=st.tuples(st.floats(-6, 0), st.floats(-2, 2), st.floats(-1, 14)))
@settings(max_examples=60, deadline=None)
def test_beta_binomial_gradient_is_that_of_its_likelihood(x: tuple[float, float, float]) -> None:
    arms = Arms(*(np.array(v, dtype=float) for v in ([0, 4, 2], [90, 250, 40], [3, 0, 9], [95, 240, 45])))
    objective = problem(arms, correlated=True).objective
    here, step = np.array(x), 1e-4
    slopes = [(objective(here + step * e)[0] - objective(here - step * e)[0]) / (2 * step) for e in np.eye(3)]
    assert objective(here)[1] == pytest.approx(slopes, rel=1e-4, abs=2e-4)
