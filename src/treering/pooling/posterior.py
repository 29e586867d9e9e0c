"""Posterior of tau on a grid of log(tau), and the mixtures of normals that follow from it.

The integral runs over log(tau) by the trapezoidal rule, whose error falls faster than any power of the step
for a density that dies out at both ends (Trefethen and Weideman 2014, SIAM Rev 56:385).

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.interpolate import CubicSpline
from scipy.optimize import brentq
from scipy.special import logsumexp, ndtr

from treering.errors import NotConvergedError
from treering.pooling.priors import TauPrior
from treering.pooling.quadrature import Array

_REACH = 45.0
_DEPTH = 37.0
_FIRST_POINTS, _MOST_POINTS = 512, 65536
_AGREE = 1e-10


@dataclass(frozen=True, slots=True)
class Mixture:
    """Mixture of normals; arrays of shape (m,), weights summing to 1."""

    weights: Array
    means: Array
    sds: Array

    def below(self, x: float) -> float:
        """Probability of a value below ``x``."""
        return float(self.weights @ ndtr((x - self.means) / self.sds))

    def quantile(self, probability: float) -> float:
        """Value below which the given probability lies."""
        centre, step = float(self.weights @ self.means), float(np.median(self.sds))
        low = high = centre
        while self.below(low) > probability:
            low, step = low - step, 2 * step
        while self.below(high) < probability:
            high, step = high + step, 2 * step
        return float(brentq(lambda x: self.below(x) - probability, low, high, xtol=1e-12, rtol=1e-13))


@dataclass(frozen=True, slots=True)
class PosteriorGrid:
    """Normalised posterior of log(tau) on equally spaced points, with the conditional effect."""

    log_tau: Array
    density: Array
    means: Array
    variances: Array
    log_total: float

    def weights(self) -> Array:
        """Probability of each grid point."""
        return np.asarray(self.density / self.density.sum())


def _conditional(
    y: Array, v: Array, tau: Array, effect_prior: tuple[float, float] | None
) -> tuple[Array, Array, Array]:
    """Mean and variance of the effect given tau, and log marginal likelihood of tau (up to a constant)."""
    spread = v[None, :] + tau[:, None] ** 2
    w = 1 / spread
    total, weighted, squares = w.sum(axis=1), w @ y, w @ y**2
    if effect_prior is not None:
        centre, sd = effect_prior
        total, weighted = total + sd**-2, weighted + centre * sd**-2
        squares = squares + centre**2 * sd**-2
    mean = weighted / total
    log = -0.5 * (np.log(spread).sum(axis=1) + np.log(total) + squares - mean**2 * total)
    return mean, 1 / total, log


def integrate_tau(
    y: Array, v: Array, prior: TauPrior, effect_prior: tuple[float, float] | None
) -> PosteriorGrid:
    """Refine the grid over log(tau) until total and posterior means agree."""
    # centred estimates keep the sum of squares free of cancellation
    shift = float(np.average(y, weights=1 / v))
    moved = None if effect_prior is None else (effect_prior[0] - shift, effect_prior[1])

    def log_density(x: Array) -> tuple[Array, Array, Array]:
        tau = np.exp(x)
        mean, variance, log = _conditional(y - shift, v, tau, moved)
        return log + prior.log_density(tau) + x, mean, variance

    low, high = _window(lambda x: log_density(x)[0], y, v, prior)
    points, last = _FIRST_POINTS, (math.inf, math.inf, math.inf)
    while points <= _MOST_POINTS:
        x = np.linspace(low, high, points)
        log, mean, variance = log_density(x)
        log[[0, -1]] -= math.log(2)  # ends of the trapezoidal rule
        total = float(logsumexp(log)) + math.log(x[1] - x[0])
        density = np.exp(log - total)
        weights = density / density.sum()
        now = (total, float(weights @ x), float(weights @ mean))
        if all(abs(a - b) < _AGREE * (1 + abs(b)) for a, b in zip(now, last, strict=True)):
            return PosteriorGrid(x, density, mean + shift, variance, total)
        points, last = 2 * points, now
    raise NotConvergedError("The posterior of tau could not be integrated.", found=f"{points // 2} points")


def _window(
    log_density: Callable[[Array], Array], y: Array, v: Array, prior: TauPrior
) -> tuple[float, float]:
    """Range of log(tau) outside which the posterior is below e^-37 of its peak."""
    landmarks = np.log(prior.quantile(np.linspace(0.0005, 0.9995, 200)))
    scales = np.log([math.sqrt(v.min()), math.sqrt(v.max()), max(float(np.ptp(y)), math.sqrt(v.min()))])
    scales = np.concatenate([scales, [float(landmarks.min()), float(landmarks.max())]])
    x = np.unique(
        np.concatenate([np.linspace(scales.min() - _REACH, scales.max() + _REACH, 1200), landmarks])
    )
    log = log_density(x)
    inside = np.flatnonzero(log > log.max() - _DEPTH)
    return float(x[max(inside[0] - 1, 0)]), float(x[min(inside[-1] + 1, len(x) - 1)])


def tau_quantiles(grid: PosteriorGrid, probabilities: tuple[float, ...]) -> list[float]:
    """Quantiles of tau from the integrated spline of the density over log(tau)."""
    cumulative = CubicSpline(grid.log_tau, grid.density).antiderivative()
    first, last = grid.log_tau[0], grid.log_tau[-1]
    total = float(cumulative(last))
    return [
        math.exp(brentq(lambda x, p=p: float(cumulative(x)) - p * total, first, last, xtol=1e-13))
        for p in probabilities
    ]


def mixtures(grid: PosteriorGrid) -> tuple[Mixture, Mixture]:
    """Mixtures over the grid points that matter."""
    weights = grid.weights()
    keep = weights > 1e-18
    weights = weights[keep] / weights[keep].sum()
    means, variances, tau = grid.means[keep], grid.variances[keep], np.exp(grid.log_tau[keep])
    return Mixture(weights, means, np.sqrt(variances)), Mixture(weights, means, np.sqrt(variances + tau**2))
