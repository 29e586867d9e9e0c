"""Maximum likelihood with variances that may be exactly zero.

Thin layer over ``scipy.optimize.minimize`` (L-BFGS-B) shared by the one-stage models: several starts,
because such likelihoods can have more than one maximum; a separate fit at every zero variance, because a
bounded search stops near a boundary and not on it; and standard errors from the observed information.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import brentq, minimize
from scipy.stats import chi2

from treering.errors import NotConvergedError
from treering.pooling.quadrature import Array

Objective = Callable[[Array], tuple[float, Array]]
"""Parameters (p,) -> log-likelihood and its gradient (p,)."""

_STEP = 1e-4
_SAME = 1e-8


@dataclass(frozen=True, slots=True)
class Problem:
    """One likelihood to be maximised.

    Attributes
    ----------
    objective : callable
        Log-likelihood with gradient.
    starts : tuple of ndarray
        Start values, each of shape (p,).
    lower, upper : ndarray, shape (p,)
        Bounds; infinite where free.
    variances : tuple of int
        Positions of the parameters for which 0 is a boundary to be tried exactly.
    coarse : callable, optional
        A cheaper approximation of the objective, used to choose between starts.
    """

    objective: Objective
    starts: tuple[Array, ...]
    lower: Array
    upper: Array
    variances: tuple[int, ...]
    coarse: Objective | None = None


@dataclass(frozen=True, slots=True)
class Fit:
    """A maximum.

    Attributes
    ----------
    x : ndarray, shape (p,)
        Parameters at the maximum.
    log_likelihood : float
        Value there.
    covariance : ndarray, shape (p, p)
        Inverse observed information; rows and columns of parameters on a boundary are 0.
    """

    x: Array
    log_likelihood: float
    covariance: Array


def _search(
    problem: Problem, objective: Objective, start: Array, fixed: dict[int, float]
) -> tuple[Array, float]:
    """One bounded search with some parameters held; return the best point and its log-likelihood."""
    lower, upper, start = problem.lower.copy(), problem.upper.copy(), start.copy()
    for position, value in fixed.items():
        lower[position] = upper[position] = start[position] = value

    def negative(x: Array) -> tuple[float, Array]:
        value, gradient = objective(x)
        return -value, -gradient

    found = minimize(
        negative,
        start,
        jac=True,
        method="L-BFGS-B",
        bounds=list(zip(lower, upper, strict=True)),
        options={"maxiter": 500, "ftol": 1e-14, "gtol": 1e-9},
    )
    if not np.all(np.isfinite(found.x)) or not np.isfinite(found.fun):
        raise NotConvergedError("The likelihood of the one-stage model could not be maximised.")
    return np.asarray(found.x, dtype=np.float64), -float(found.fun)


def _best(problem: Problem, fixed: dict[int, float]) -> tuple[Array, float]:
    """Best of all starts, and of fits with each variance at exactly 0 (preferred when equally good)."""
    rough = problem.coarse or problem.objective
    inside = [_search(problem, rough, start, fixed) for start in problem.starts]
    point, value = max(inside, key=lambda pair: pair[1])
    held = dict(fixed)
    for position in problem.variances:
        if position in fixed:
            continue
        at_zero = _search(problem, rough, point, {**held, position: 0.0})
        if at_zero[1] >= value - _SAME:
            (point, value), held = at_zero, {**held, position: 0.0}
    if problem.coarse is None:
        return point, value
    point, value = _search(problem, problem.objective, point, held)
    rising = [p for p in held if p not in fixed and problem.objective(point)[1][p] > 1e-6]
    if rising:
        # the cheap approximation put a variance on 0 where the likelihood still climbs away from it
        point[rising] = 1e-3
        point, value = _search(problem, problem.objective, point, fixed)
    return point, value


def _information(problem: Problem, x: Array, free: list[int]) -> Array:
    """Negative second derivatives for the free parameters, by central differences of the gradient."""
    columns = []
    for position in free:
        step = _STEP * max(1.0, abs(x[position]))
        if position in problem.variances:
            step = min(step, 0.5 * x[position])
        ahead, behind = x.copy(), x.copy()
        ahead[position] += step
        behind[position] -= step
        slope = (problem.objective(ahead)[1] - problem.objective(behind)[1]) / (2 * step)
        columns.append(-slope[free])
    matrix = np.array(columns)
    return np.asarray(0.5 * (matrix + matrix.T))


def maximise(problem: Problem) -> Fit:
    """Maximise the likelihood.

    Parameters
    ----------
    problem : Problem
        What to maximise.

    Returns
    -------
    Fit
        The best maximum found over all starts.

    Raises
    ------
    NotConvergedError
        When no start leads to a proper maximum.
    """
    return fit_at(problem, *best_point(problem))


def best_point(problem: Problem) -> tuple[Array, float]:
    """Return the best parameters over all starts and the log-likelihood there.

    Parameters
    ----------
    problem : Problem
        What to maximise.

    Returns
    -------
    ndarray, shape (p,)
        Parameters.
    float
        Log-likelihood.
    """
    return _best(problem, {})


def fit_at(problem: Problem, x: Array, value: float) -> Fit:
    """Complete a maximum with the inverse observed information.

    Parameters
    ----------
    problem : Problem
        The likelihood.
    x : ndarray, shape (p,)
        Its maximum.
    value : float
        Log-likelihood there.

    Returns
    -------
    Fit

    Raises
    ------
    NotConvergedError
        When ``x`` is not a proper maximum.
    """
    _refuse_limits(problem, x)
    free = [p for p in range(len(x)) if p not in problem.variances or x[p] > 1e-7]
    information = _information(problem, x, free)
    try:
        np.linalg.cholesky(information)
    except np.linalg.LinAlgError as error:
        raise NotConvergedError(
            "The one-stage model has no proper maximum: the information matrix is not positive definite.",
            next_step="There may be too few events for this model.",
        ) from error
    covariance = np.zeros((len(x), len(x)))
    covariance[np.ix_(free, free)] = np.linalg.inv(information)
    return Fit(x=x, log_likelihood=value, covariance=covariance)


def _refuse_limits(problem: Problem, x: Array) -> None:
    """Refuse a search that ended on a limit of the search: that number is the limit's, not the data's."""
    below = np.array([p not in problem.variances for p in range(len(x))])
    margin = 1e-6 * (1 + np.abs(x))
    if np.any(x >= problem.upper - margin) or np.any(below & (x <= problem.lower + margin)):
        raise NotConvergedError(
            "The likelihood of the one-stage model still climbs where its search ends: an effect or a "
            "variation over trials has no finite estimate.",
            next_step="The events lie too one-sidedly in too few trials for this model; report the counts.",
        )


def profile_interval(problem: Problem, fit: Fit, position: int, level: float) -> tuple[float, float]:
    """Interval of one parameter by the likelihood-ratio statistic.

    Parameters
    ----------
    problem, fit : Problem, Fit
        The likelihood and its maximum.
    position : int
        Which parameter.
    level : float
        Confidence level.

    Returns
    -------
    tuple of float
        Values at which twice the drop of the profile log-likelihood equals the chi-square quantile (1 df).
        A side on which the likelihood never drops that far is infinite.
    """
    limit = float(chi2.ppf(level, 1))
    near = replace(problem, starts=(fit.x,), coarse=None)

    def excess(value: float) -> float:
        return 2 * (fit.log_likelihood - _best(near, {position: value})[1]) - limit

    ends = []
    width = float(np.sqrt(fit.covariance[position, position]))
    for side in (-1.0, 1.0):
        outside = [
            step for step in (2.5, 5.0, 10.0, 20.0) if excess(fit.x[position] + side * step * width) > 0
        ]
        if not outside:
            ends.append(side * np.inf)
            continue
        far = fit.x[position] + side * outside[0] * width
        ends.append(float(brentq(excess, fit.x[position], far, xtol=1e-7)))
    return ends[0], ends[1]
