"""Weighted least squares with a between-trial variance: the core of subgroups and meta-regression.

Model: y_i = x_i' beta + u_i + e_i, with u_i normal with variance tau2 and e_i normal with known variance v_i.
Estimators of the residual tau2: method of moments (Thompson and Sharp 1999, Stat Med 18:2693, the
DerSimonian-Laird kind), Hedges' unweighted moments, Paule-Mandel (residual Q equal to its degrees of
freedom), ML and REML (Raudenbush 2009, in Cooper, Hedges and Valentine). Likelihoods can have more than one
maximum; every sign change of the score is found and the best maximum is taken.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.stats import chi2

from treering.errors import AnalysisError
from treering.pooling.quadrature import Array
from treering.terms import Tau2

ROUNDING = 1e-28
"""Share of the weighted sum of squares below which a residual one is rounding error."""
_PER_DECADE = 20
_MOST_POINTS = 1000


@dataclass(frozen=True, slots=True)
class Design:
    """Trials with their covariates: estimates (k,), variances (k,), design matrix (k, p)."""

    y: Array
    v: Array
    x: Array

    @property
    def df(self) -> int:
        """Residual degrees of freedom k - p."""
        return int(self.x.shape[0] - self.x.shape[1])


@dataclass(frozen=True, slots=True)
class WeightedFit:
    """Generalised least squares at one tau2: coefficients (p,), covariance (p, p), residual Q."""

    coefficients: Array
    covariance: Array
    q: float


def fit_at(design: Design, tau2: float) -> WeightedFit:
    """Weighted least squares with weights 1 / (v + tau2).

    Parameters
    ----------
    design : Design
        Trials and covariates, of full rank.
    tau2 : float
        Between-trial variance.

    Returns
    -------
    WeightedFit
    """
    root = 1 / np.sqrt(design.v + tau2)
    q, r = np.linalg.qr(design.x * root[:, None])
    z = design.y * root
    inverse = np.linalg.inv(r)
    fitted = q.T @ z
    residual = z - q @ fitted
    left = float(residual @ residual)
    # What rounding leaves of trials that lie exactly on the regression is no residual.
    q_residual = left if left > ROUNDING * float(z @ z) else 0.0
    return WeightedFit(inverse @ fitted, inverse @ inverse.T, q_residual)


def _score(design: Design, tau2: float, restricted: bool) -> tuple[float, float]:
    """Return slope in tau2 and value of the profile (restricted) log-likelihood, up to a constant."""
    w = 1 / (design.v + tau2)
    q, r = np.linalg.qr(design.x * np.sqrt(w)[:, None])
    z = design.y * np.sqrt(w)
    residual = z - q @ (q.T @ z)
    leverage = np.sum(q * q, axis=1) if restricted else 0.0
    slope = 0.5 * float(np.sum(w * residual**2) - np.sum(w * (1 - leverage)))
    value = 0.5 * float(np.sum(np.log(w)) - residual @ residual)
    if restricted:
        value -= float(np.sum(np.log(np.abs(np.diag(r)))))
    return slope, value


def _root(function: Callable[[float], float], low: float, high: float) -> float:
    """Zero between two places, as good as its own size allows: tau2 may be of any size, as its unit is."""
    return float(brentq(function, low, high, xtol=float(np.finfo(np.float64).tiny), rtol=1e-13))


def _maximum_likelihood(design: Design, restricted: bool) -> float:
    """Global maximum over tau2 >= 0: the best of 0 and every falling zero of the score."""
    spread = float(np.var(design.y)) + float(design.v.max())
    low, high = min(1e-9 * spread, 1e-3 * float(design.v.min())), 1e3 * spread
    points = min(int(_PER_DECADE * np.log10(high / low)), _MOST_POINTS)
    grid = np.concatenate([[0.0], np.geomspace(low, high, points)])
    slopes = np.array([_score(design, t, restricted)[0] for t in grid])
    falls = np.flatnonzero((slopes[:-1] > 0) & (slopes[1:] <= 0))
    roots = [_root(lambda t: _score(design, t, restricted)[0], grid[i], grid[i + 1]) for i in falls]
    return float(max([0.0, *roots], key=lambda t: _score(design, t, restricted)[1]))


def _residual_projection(design: Design) -> Array:
    """Return I - X (X'X)^-1 X', shape (k, k)."""
    q, _ = np.linalg.qr(design.x)
    return np.asarray(np.eye(len(design.y)) - q @ q.T)


def _hedges(design: Design) -> float:
    projection = _residual_projection(design)
    return float((design.y @ projection @ design.y - np.diag(projection) @ design.v) / design.df)


def _moments(design: Design) -> float:
    w = 1 / design.v
    fit = fit_at(design, 0.0)
    squared = design.x.T @ (design.x * (w**2)[:, None])
    return (fit.q - design.df) / float(w.sum() - np.trace(fit.covariance @ squared))


def solve_residual_q(design: Design, target: float) -> float:
    """Return the tau2 at which the residual Q equals ``target``; 0 when Q is below it already at 0.

    Parameters
    ----------
    design : Design
        Trials and covariates.
    target : float
        Wanted value of Q, above 0.

    Returns
    -------
    float
    """
    if fit_at(design, 0.0).q <= target:
        return 0.0
    high = float(np.var(design.y)) + float(design.v.max())
    while fit_at(design, high).q > target:
        high *= 4
    return _root(lambda t: fit_at(design, t).q - target, 0.0, high)


def residual_tau2(design: Design, method: Tau2) -> float:
    """Estimate the between-trial variance left after the covariates.

    Parameters
    ----------
    design : Design
        Trials and covariates with at least one residual degree of freedom.
    method : Tau2
        "dersimonian-laird", "hedges", "paule-mandel", "ml" or "reml".

    Returns
    -------
    float
        Never below 0.

    Raises
    ------
    AnalysisError
        For an estimator that has no agreed form with covariates.
    """
    if method in (Tau2.SIDIK_JONKMAN, Tau2.HUNTER_SCHMIDT):
        raise AnalysisError(
            "This estimator of tau2 is not offered with covariates.",
            found=method.value,
            expected="reml, ml, paule-mandel, dersimonian-laird or hedges",
        )
    if method in (Tau2.ML, Tau2.REML):
        return _maximum_likelihood(design, restricted=method is Tau2.REML)
    if method is Tau2.PAULE_MANDEL:
        return solve_residual_q(design, float(design.df))
    return max(0.0, _hedges(design) if method is Tau2.HEDGES else _moments(design))


def q_profile(design: Design, level: float) -> tuple[float, float]:
    """Q-profile interval of the residual tau2 (Viechtbauer 2007, Stat Med 26:37; Jackson 2014).

    Parameters
    ----------
    design : Design
        Trials and covariates.
    level : float
        Confidence level.

    Returns
    -------
    tuple of float
        Lower and upper limit, never below 0.
    """
    upper, lower = chi2.ppf(0.5 + level / 2, design.df), chi2.ppf(0.5 - level / 2, design.df)
    return solve_residual_q(design, float(upper)), solve_residual_q(design, float(lower))


def check_design(design: Design, names: tuple[str, ...]) -> None:
    """Refuse designs that cannot be fitted.

    Parameters
    ----------
    design : Design
        Trials and covariates.
    names : tuple of str, length p
        Names of the columns.

    Raises
    ------
    AnalysisError
        Fewer trials than coefficients plus one, or columns that determine each other.
    """
    k, p = design.x.shape
    if k <= p:
        raise AnalysisError(
            "There are too few trials for these covariates.",
            found=f"{k} trials, {p} coefficients ({', '.join(names)})",
            expected=f"at least {p + 1} trials",
        )
    scale = np.abs(design.x).max(axis=0)
    if np.any(scale == 0) or np.linalg.matrix_rank(design.x / scale) < p:
        raise AnalysisError("The covariates determine each other.", found=", ".join(names))
