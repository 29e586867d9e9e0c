"""What each trial does to the result: leave-one-out, influence measures, cumulative pooling.

All selections of trials are laid side by side and pooled by the one kernel, without refitting in a loop.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
import numpy.typing as npt
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike, numbers, same_trials, trial_labels
from treering.pooling.batch import from_mask, single, spans
from treering.pooling.checks import check_effects
from treering.pooling.columns import Columns, join
from treering.pooling.inverse_variance import pool_checked
from treering.pooling.kernel import Options
from treering.pooling.result import FIELDS, FloatArray

SELECTION_FIELDS = tuple(name for name in FIELDS if name != "weights")
Present = Callable[[npt.NDArray[np.intp]], npt.NDArray[np.bool_]]


def leave_one_out(
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    model: str = "random",
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    prediction_df: str = "k-2",
) -> pd.DataFrame:
    """Pool again without each trial in turn.

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        At least two trials, as for `pool`.
    model, tau2, interval, level, prediction_df
        As for `pool`.

    Returns
    -------
    DataFrame
        One row for each trial left out, indexed by its label, with the fields of `PooledEffect` but weights.

    Raises
    ------
    AnalysisError
        As for `pool`; also for a single trial.
    """
    options = Options.read(
        model=model, tau2=tau2, interval=interval, level=level, prediction_df=prediction_df
    )
    y, v = _several(estimates, variances)
    labels = trial_labels(estimates, y.size)
    everyone = np.arange(y.size)[:, None]
    return _pool_selections(y, v, options, labels, lambda columns: everyone != columns)


def cumulative(
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    order: ArrayLike | None = None,
    model: str = "random",
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    prediction_df: str = "k-2",
) -> pd.DataFrame:
    """Pool the first trial, the first two, and so on.

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        Trials, as for `pool`.
    order : array_like of float or dates, shape (k,), optional
        Sort key, for example the year; trials with the same key keep their order. Input order if not given.
    model, tau2, interval, level, prediction_df
        As for `pool`.

    Returns
    -------
    DataFrame
        One row for each step, indexed by the trial added, with the fields of `PooledEffect` but weights.

    Raises
    ------
    AnalysisError
        As for `pool`; also when `order` has another length, or a trial has none.
    """
    options = Options.read(
        model=model, tau2=tau2, interval=interval, level=level, prediction_df=prediction_df
    )
    y, v = check_effects(estimates, variances)
    labels = list(trial_labels(estimates, y.size))
    if order is not None:
        same_trials(estimates, order, "estimates and order")
        key = _sort_key(order, labels)
        places = np.argsort(key, kind="stable")
        y, v, labels = y[places], v[places], [labels[at] for at in places]
    everyone = np.arange(y.size)[:, None]
    return _pool_selections(y, v, options, labels, lambda columns: everyone <= columns)


def _sort_key(order: ArrayLike, labels: Sequence[object]) -> npt.NDArray[np.float64 | np.datetime64]:
    """Numbers or dates to sort by, one for each trial."""
    dated = getattr(getattr(order, "dtype", None), "kind", "") == "M"
    key = np.asarray(order) if dated else numbers(order, "order")
    if key.shape != (len(labels),):
        raise AnalysisError(
            "order and estimates differ in length.", found=f"{key.size} for {len(labels)} trials"
        )
    bad = np.isnat(key) if dated else ~np.isfinite(key)
    if bad.any():
        at = int(np.argmax(bad))
        raise AnalysisError(
            "order is missing or not finite.", trial=str(labels[at]), expected="a number or a date"
        )
    return key


def _several(estimates: ArrayLike, variances: ArrayLike) -> tuple[FloatArray, FloatArray]:
    y, v = check_effects(estimates, variances)
    if y.size < 2:
        raise AnalysisError("Nothing is left without the only trial.", found=1, expected="two or more")
    return y, v


def _pool_selections(
    y: FloatArray, v: FloatArray, options: Options, labels: Sequence[object], present: Present
) -> pd.DataFrame:
    """Pool one selection of the trials for each trial; `present` tells who is in the selections asked for."""
    parts: list[Columns] = []
    for span in spans(y.size, y.size):
        columns = np.arange(span.start, span.stop)
        batch = from_mask(y, v, present(columns))
        parts.append(pool_checked(batch, options, labels[span.start : span.stop]))
    index = pd.Index(np.array(labels, dtype=object), name="trial")
    return pd.DataFrame(join(parts, SELECTION_FIELDS), index=index)


def influence(
    estimates: ArrayLike, variances: ArrayLike, *, model: str = "random", tau2: str = "reml"
) -> pd.DataFrame:
    """Measure the influence of each trial on the pooled effect (Viechtbauer and Cheung 2010).

    With mu, tau2, V the pooled effect, between-trial variance and ordinary variance, and a subscript -i for
    the same without trial i: hat h = w / sum w; standardized residual (y - mu) / sqrt((v + tau2)(1 - h));
    studentized residual (y - mu_-i) / sqrt(v + tau2_-i + V_-i); DFFITS (mu - mu_-i) / sqrt(h (v + tau2_-i));
    Cook's distance (mu - mu_-i)^2 / V; covariance ratio V_-i / V.

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        At least two trials, as for `pool`.
    model, tau2 : str
        As for `pool`; influence is measured with ordinary (Wald) variances.

    Returns
    -------
    DataFrame
        One row for each trial, indexed by its label: hat, standardized_residual, studentized_residual,
        dffits, cooks_distance, covariance_ratio, and estimate_without, tau2_without.

    Raises
    ------
    AnalysisError
        As for `pool`; also for a single trial.

    References
    ----------
    Viechtbauer W, Cheung MW-L (2010), Res Synth Methods 1:112. Cited from memory.
    """
    y, v = _several(estimates, variances)
    options = Options.read(model=model, tau2=tau2, interval="wald", level=0.95, prediction_df="k-2")
    whole = pool_checked(single(y, v), options, ["all trials"])
    without = leave_one_out(estimates, variances, model=model, tau2=tau2, interval="wald")
    mean, between = whole["estimate"][0], whole["tau2"][0]
    own = whole["standard_error"][0] ** 2
    hat = whole["weights"][:, 0]
    mean_i = without["estimate"].to_numpy()
    # Of two trials one is left, whose tau2 is not estimable; its residual then rests on v alone.
    between_i = without["tau2"].fillna(0.0).to_numpy()
    own_i = without["standard_error"].to_numpy() ** 2
    return pd.DataFrame(
        {
            "hat": hat,
            "standardized_residual": (y - mean) / np.sqrt((v + between) * (1.0 - hat)),
            "studentized_residual": (y - mean_i) / np.sqrt(v + between_i + own_i),
            "dffits": (mean - mean_i) / np.sqrt(hat * (v + between_i)),
            "cooks_distance": (mean - mean_i) ** 2 / own,
            "covariance_ratio": own_i / own,
            "estimate_without": mean_i,
            "tau2_without": without["tau2"].to_numpy(),
        },
        index=without.index,
    )
