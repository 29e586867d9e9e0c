"""Adaptive Gauss-Hermite quadrature over a trial's normal random effects.

Every one-stage model here has the same shape: a trial's likelihood given its own parameters ``theta``
(one or two of them), and a normal distribution of ``theta`` over trials with independent components. This
module integrates the second out of the first for all trials at once.

The rule is centred at the mode of each trial's integrand and scaled by its curvature (Liu and Pierce 1994,
Biometrika 81:624; Pinheiro and Bates 1995, J Comput Graph Stat 4:12), which is why few nodes suffice. All
of it works in z = (theta - mean) / sd, so that a variance of exactly 0 is an ordinary point.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from itertools import product

import numpy as np
import numpy.typing as npt
from scipy.special import logsumexp

from treering.errors import NotConvergedError

Array = npt.NDArray[np.float64]
Derivatives = tuple[Array, Array, Array]
TrialLikelihood = Callable[[Array], Derivatives]
"""theta of shape (k, n, d) -> log-likelihood (k, n), gradient (k, n, d), Hessian (k, n, d, d)."""

_MODE_STEPS = 100
_MODE_TOLERANCE = 1e-9


@dataclass(frozen=True, slots=True)
class Marginal:
    """Integrated likelihood of every trial and its posterior nodes.

    Attributes
    ----------
    log : ndarray, shape (k,)
        Log of the integrated likelihood.
    points : ndarray, shape (k, n, d)
        Nodes on the scale of theta.
    weights : ndarray, shape (k, n)
        Posterior probability of each node; rows sum to 1.
    gradient_mean : ndarray, shape (k, d)
        Derivative of ``log`` with respect to the mean of theta.
    gradient_variance : ndarray, shape (k, d)
        Derivative of ``log`` with respect to the variance of each component of theta.
    """

    log: Array
    points: Array
    weights: Array
    gradient_mean: Array
    gradient_variance: Array


@lru_cache(maxsize=16)
def _rule(nodes: int, dimensions: int) -> tuple[Array, Array]:
    """Nodes (n, d) and log weights (n,) for a standard normal weight, tensor product over dimensions."""
    x, w = np.polynomial.hermite_e.hermegauss(nodes)
    points = np.array(list(product(x, repeat=dimensions)))
    log_weights = np.array([sum(row) for row in product(np.log(w / np.sqrt(2 * np.pi)), repeat=dimensions)])
    return points, log_weights


def _joint(likelihood: TrialLikelihood, mean: Array, sd: Array, z: Array) -> Derivatives:
    """Log integrand g(z) = log L(mean + sd z) - z'z / 2 at one point per trial, with derivatives in z."""
    value, gradient, hessian = likelihood((mean + sd * z)[:, None, :])
    g = value[:, 0] - 0.5 * np.sum(z * z, axis=1)
    first = sd * gradient[:, 0] - z
    second = sd[:, None] * sd[None, :] * hessian[:, 0] - np.eye(len(sd))
    return g, first, second


def _modes(likelihood: TrialLikelihood, mean: Array, sd: Array, k: int) -> tuple[Array, Array]:
    """Mode of each trial's integrand in z and the negative Hessian there (Newton with step halving)."""
    z = np.zeros((k, len(sd)))
    g, first, second = _joint(likelihood, mean, sd, z)
    scale = np.ones(k)
    for _ in range(_MODE_STEPS):
        if np.max(np.abs(first), initial=0.0) < _MODE_TOLERANCE:
            return z, -second
        step = np.linalg.solve(-second, first[..., None])[..., 0]
        trial_z = z + scale[:, None] * step
        new_g, new_first, new_second = _joint(likelihood, mean, sd, trial_z)
        better = new_g >= g - 1e-12 * (1 + np.abs(g))
        z = np.where(better[:, None], trial_z, z)
        g, first = np.where(better, new_g, g), np.where(better[:, None], new_first, first)
        second = np.where(better[:, None, None], new_second, second)
        scale = np.where(better, 1.0, 0.5 * scale)
    # a curvature within rounding of flat still gives a valid (if less well placed) rule
    if np.max(np.abs(first)) < 1e-5:
        return z, -second
    raise NotConvergedError(
        "The mode of a trial's random effect was not found.",
        found=f"largest gradient {np.max(np.abs(first)):.3g}",
        next_step="Check the trial's counts; a simpler model may be needed.",
    )


def marginal(likelihood: TrialLikelihood, mean: Array, variances: Array, *, k: int, nodes: int) -> Marginal:
    """Integrate each trial's likelihood over its normal random effects.

    Parameters
    ----------
    likelihood : callable
        Log-concave log-likelihood of all trials; see ``TrialLikelihood``.
    mean : ndarray, shape (d,) or (k, d)
        Mean of theta.
    variances : ndarray, shape (d,)
        Variance of each component of theta (independent components), 0 allowed.
    k : int
        Number of trials.
    nodes : int
        Nodes per dimension.

    Returns
    -------
    Marginal
        Log integrated likelihoods with exact derivatives. The derivative with respect to a variance is
        half the posterior mean of (second derivative + squared first derivative), because the normal
        density solves the heat equation; unlike the textbook form it stays finite at variance 0.
    """
    sd = np.sqrt(variances)
    x, log_w = _rule(nodes, len(sd))
    mode, information = _modes(likelihood, mean, sd, k)
    # z = mode + L^-T x with L L' = information: unit curvature in x
    root = np.linalg.inv(np.linalg.cholesky(information))
    z = mode[:, None, :] + np.einsum("kji,nj->kni", root, x)
    log_volume = np.log(np.abs(np.linalg.det(root)))
    points = (mean if mean.ndim == 1 else mean[:, None, :]) + sd * z
    value, gradient, hessian = likelihood(points)
    terms = value - 0.5 * np.sum(z * z, axis=2) + 0.5 * np.sum(x * x, axis=1) + log_w + log_volume[:, None]
    log = np.asarray(logsumexp(terms, axis=1))
    weights = np.exp(terms - log[:, None])
    curvature = np.einsum("knii->kni", hessian) + gradient**2
    return Marginal(
        log=log,
        points=points,
        weights=weights,
        gradient_mean=np.einsum("kn,kni->ki", weights, gradient),
        gradient_variance=0.5 * np.einsum("kn,kni->ki", weights, curvature),
    )
