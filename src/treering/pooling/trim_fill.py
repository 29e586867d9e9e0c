"""Trim and fill: how many trials would make the funnel symmetric, and where the effect would then be.

A sensitivity analysis, not a correction: asymmetry has more causes than missing trials.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import stats

from treering.errors import AnalysisError, NotConvergedError
from treering.pooling.arrays import ArrayLike
from treering.pooling.checks import check_effects
from treering.pooling.inverse_variance import pool
from treering.pooling.result import FloatArray, PooledEffect
from treering.pooling.small_study import FEW_TRIALS


@dataclass(frozen=True)
class TrimAndFill:
    """Result of trim and fill.

    Attributes
    ----------
    added : int
        Mirrored trials filled in.
    side : {"left", "right"}
        Where they were missing.
    pooled : PooledEffect
        Pooled effect with them.
    filled_estimates, filled_variances : ndarray, shape (added,)
        The mirrored trials.
    few_trials : bool
        Fewer than ten trials: not to be read.
    """

    added: int
    side: str
    pooled: PooledEffect
    filled_estimates: FloatArray
    filled_variances: FloatArray
    few_trials: bool


def trim_and_fill(
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    side: str | None = None,
    model: str = "common",
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
) -> TrimAndFill:
    """Trim and fill with the estimator L0 (Duval and Tweedie 2000, Biometrics 56:455; J Am Stat Assoc 95:89).

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        At least three trials.
    side : {"left", "right"}, optional
        Where trials are thought to be missing. If not given: against the lean of the funnel, so left when the
        regression of effect on standard error rises.
    model, tau2, interval, level
        Model that finds the centre and pools the filled set; as for `pool`.

    Returns
    -------
    TrimAndFill
        Trials added and the pooled effect with them.

    Raises
    ------
    AnalysisError
        Bad input as for `pool`, fewer than three trials, another word for the side.
    NotConvergedError
        The number of trials did not settle.
    """
    y, v = check_effects(estimates, variances)
    if y.size < 3:
        raise AnalysisError("Trim and fill needs three or more trials.", found=int(y.size))
    if side not in (None, "left", "right"):
        raise AnalysisError("side is not a known word.", found=side, expected="left, right or none given")
    chosen = side or _leaning_side(y, v)
    sign = 1.0 if chosen == "left" else -1.0

    def centre_of(values: FloatArray, spreads: FloatArray) -> float:
        return sign * pool(sign * values, spreads, model=model, tau2=tau2, interval=interval).estimate

    order = np.argsort(sign * y, kind="stable")
    added, centre = _missing(sign * y[order], v[order], centre_of)
    extreme = order[y.size - added :]
    mirrored, spread = 2.0 * sign * centre - y[extreme], v[extreme]
    both_y, both_v = np.concatenate([y, mirrored]), np.concatenate([v, spread])
    pooled = pool(both_y, both_v, model=model, tau2=tau2, interval=interval, level=level)
    return TrimAndFill(added, chosen, pooled, mirrored, spread, y.size < FEW_TRIALS)


def _leaning_side(y: FloatArray, v: FloatArray) -> str:
    """Side opposite to the small trials: left when the effect rises with its standard error."""
    w, error = 1.0 / v, np.sqrt(v)
    centred = error - (w * error).sum() / w.sum()
    return "left" if (w * centred * y).sum() >= 0.0 else "right"


def _missing(
    y: FloatArray, v: FloatArray, centre_of: Callable[[FloatArray, FloatArray], float]
) -> tuple[int, float]:
    """Trim the k0 right-most of the sorted trials, re-centre, and count again until k0 stays.

    L0 = (4 T - k (k + 1)) / (2 k - 1) with T the sum of the ranks of |y - centre| right of the centre.
    """
    k, trimmed = y.size, 0
    seen: list[int] = []
    while trimmed not in seen:
        seen.append(trimmed)
        centre = centre_of(y[: k - trimmed], v[: k - trimmed])
        ranks = stats.rankdata(np.abs(y - centre))
        right = float(ranks[y > centre].sum())
        raw = (4.0 * right - k * (k + 1.0)) / (2.0 * k - 1.0)
        trimmed = int(min(max(np.floor(raw + 0.5), 0.0), k - 2))
    if trimmed != seen[-1]:
        raise NotConvergedError(
            "Trim and fill goes round in circles.", found=f"counts {seen}, then {trimmed}"
        )
    return trimmed, centre
