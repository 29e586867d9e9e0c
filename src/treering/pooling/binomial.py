"""Unconditional likelihood of a 2x2 table: two binomials joined by a logit.

Coding: logit(risk, intervention) = a + theta / 2 and logit(risk, comparator) = a - theta / 2, with ``a``
the trial's intercept and ``theta`` its log odds ratio. The symmetric coding is deliberate: with 0/1 coding
the random effect would add variance to the intervention arm only, and the estimated between-trial variance
is then badly low (Jackson, Law, Stijnen, Viechtbauer and White 2018, Stat Med 37:1059, models 4 and 5).

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import expit

from treering.errors import NotConvergedError
from treering.pooling.quadrature import Array, Derivatives, Marginal, marginal

_PROFILE_STEPS, _PROFILE_NEWTON = 100, 25
_PROFILE_TOLERANCE = 1e-10
_PROFILE_WIDTH = 1e-9


@dataclass(frozen=True, slots=True)
class Arms:
    """Counts of both arms, shape (k,) each: events and totals, intervention (1) and comparator (2)."""

    events_1: Array
    total_1: Array
    events_2: Array
    total_2: Array

    @property
    def whole(self) -> bool:
        """Whether all events and totals are whole numbers."""
        both = np.concatenate([self.events_1, self.total_1, self.events_2, self.total_2])
        return bool(np.all(both == np.floor(both)))

    def subset(self, keep: npt.NDArray[np.bool_]) -> Arms:
        """Return the trials where ``keep`` is true."""
        return Arms(self.events_1[keep], self.total_1[keep], self.events_2[keep], self.total_2[keep])


def _arm(events: Array, total: Array, eta: Array) -> tuple[Array, Array, Array]:
    """Binomial log-likelihood without its constant, score and curvature in the logit ``eta`` (k, n)."""
    risk = expit(eta)
    value = events[:, None] * eta - total[:, None] * np.logaddexp(0.0, eta)
    return value, events[:, None] - total[:, None] * risk, -total[:, None] * risk * (1 - risk)


def intercept_and_effect(arms: Arms, theta: Array) -> Derivatives:
    """Return derivatives in (intercept, log odds ratio): ``theta`` of shape (k, n, 2)."""
    intercept, half = theta[..., 0], 0.5 * theta[..., 1]
    v1, s1, h1 = _arm(arms.events_1, arms.total_1, intercept + half)
    v2, s2, h2 = _arm(arms.events_2, arms.total_2, intercept - half)
    gradient = np.stack([s1 + s2, 0.5 * (s1 - s2)], axis=-1)
    cross = 0.5 * (h1 - h2)
    hessian = np.stack([np.stack([h1 + h2, cross], -1), np.stack([cross, 0.25 * (h1 + h2)], -1)], -2)
    return v1 + v2, gradient, hessian


def starting_intercepts(arms: Arms) -> Array:
    """Crude intercepts: mean of both arms' logits with one half added to every cell (start values only)."""
    l1 = np.log((arms.events_1 + 0.5) / (arms.total_1 - arms.events_1 + 0.5))
    l2 = np.log((arms.events_2 + 0.5) / (arms.total_2 - arms.events_2 + 0.5))
    return 0.5 * (l1 + l2)


def profiled_marginal(
    arms: Arms, mean: float, variance: float, intercepts: Array, *, nodes: int
) -> tuple[Marginal, Array]:
    """Integrate over the random effect and maximise over each trial's own intercept.

    Parameters
    ----------
    arms : Arms
        Trials with at least one event and one non-event (elsewhere the maximum lies at infinity).
    mean, variance : float
        Mean and variance of the log odds ratio over trials.
    intercepts : ndarray, shape (k,)
        Start values.
    nodes : int
        Quadrature nodes.

    Returns
    -------
    Marginal
        At the maximising intercepts; its derivatives are those of the profile (envelope theorem).
    ndarray, shape (k,)
        The maximising intercepts.

    Raises
    ------
    NotConvergedError
        When Newton steps on the intercepts do not settle.
    """
    k = len(intercepts)
    low, high = np.full(k, -np.inf), np.full(k, np.inf)
    for step in range(_PROFILE_STEPS):
        current = intercepts

        def effect_only(theta: Array, fixed: Array = current) -> Derivatives:
            both = np.concatenate([np.broadcast_to(fixed[:, None, None], theta.shape), theta], axis=2)
            value, gradient, hessian = intercept_and_effect(arms, both)
            return value, gradient[..., 1:], hessian[..., 1:, 1:]

        result = marginal(effect_only, np.array([mean]), np.array([variance]), k=k, nodes=nodes)
        both = np.concatenate(
            [np.broadcast_to(current[:, None, None], result.points.shape), result.points], 2
        )
        _, gradient, hessian = intercept_and_effect(arms, both)
        score = np.sum(result.weights * gradient[..., 0], axis=1)
        # Louis 1982: curvature of the integrated log-likelihood from complete-data derivatives
        curvature = np.sum(result.weights * (hessian[..., 0, 0] + gradient[..., 0] ** 2), axis=1) - score**2
        # the integrated likelihood is log-concave in the intercept: the sign of the score brackets the root
        low, high = np.where(score > 0, current, low), np.where(score < 0, current, high)
        settled = (np.abs(score) < _PROFILE_TOLERANCE * (1 + np.max(arms.total_1))) | (
            high - low < _PROFILE_WIDTH
        )
        if settled.all():
            return result, current
        complete = np.sum(result.weights * hessian[..., 0, 0], axis=1)
        usable = np.where(curvature < 1e-4 * complete, curvature, complete)
        proposed = current + np.clip(-score / usable, -2.0, 2.0)
        outside = (proposed <= low) | (proposed >= high) | (step >= _PROFILE_NEWTON)
        intercepts = np.where(outside & np.isfinite(low + high), 0.5 * (low + high), proposed)
    raise NotConvergedError(
        "The trial intercepts of the one-stage model did not settle.",
        found=f"largest score {np.max(np.abs(score)):.3g}",
        next_step="Use random trial intercepts or the hypergeometric-normal model.",
    )
