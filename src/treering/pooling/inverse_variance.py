"""Inverse-variance pooling: `pool` for one synthesis, `pool_many` for thousands at once."""

from __future__ import annotations

import os
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from treering.errors import AnalysisError
from treering.pooling.arrays import ArrayLike, same_trials, trial_labels
from treering.pooling.batch import Batch, IntArray, chunks, pack, single
from treering.pooling.checks import check_effects, check_finite_result
from treering.pooling.columns import Columns, join, split_weights
from treering.pooling.kernel import Options, pool_batch
from treering.pooling.result import FIELDS, FloatArray, PooledEffect

WORTH_THREADS = 1_000_000
"""Trials from which on two threads were seen to gain at all; with fewer they wait for the interpreter."""


def pool(
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    model: str = "random",
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    prediction_df: str = "k-2",
) -> PooledEffect:
    """Pool the effects of several trials.

    Parameters
    ----------
    estimates, variances : array_like, shape (k,)
        Effect of each trial on the analysis scale (log for ratios) and its squared standard error.
    model : {"random", "common"}
        Random effects, or one common effect by inverse variance.
    tau2 : str
        Estimator of the between-trial variance: "dersimonian-laird", "paule-mandel", "reml", "ml", "hedges",
        "sidik-jonkman" or "hunter-schmidt". "reml" and "ml" return the global maximum of their likelihood.
    interval : {"modified-knapp-hartung", "knapp-hartung", "wald"}
        Interval and test of a random-effects estimate. Knapp-Hartung: variance sum w (y - mu)^2 /
        ((k - 1) sum w) and Student's t on k - 1 degrees of freedom; modified: that variance never below the
        ordinary 1 / sum w. A common effect and a single trial always have the ordinary (Wald) interval.
    level : float
        Confidence level of all intervals, a fraction.
    prediction_df : {"k-2", "k-1"}
        Degrees of freedom of the prediction interval.

    Returns
    -------
    PooledEffect
        Effect, test, heterogeneity, prediction interval and weights.

    Raises
    ------
    AnalysisError
        No trial; an estimate or variance that cannot be used, named by its trial; an unknown option.

    References
    ----------
    DerSimonian R, Laird N (1986), Control Clin Trials 7:177. Knapp G, Hartung J (2003), Stat Med 22:2693.
    Roever C, Knapp G, Friede T (2015), BMC Med Res Methodol 15:99. Viechtbauer W (2007), Stat Med 26:37.
    Higgins JPT, Thompson SG, Spiegelhalter DJ (2009), J R Stat Soc A 172:137. Wetterslev J et al. (2009),
    BMC Med Res Methodol 9:86. Cited from memory.
    """
    options = Options.read(
        model=model, tau2=tau2, interval=interval, level=level, prediction_df=prediction_df
    )
    y, v = check_effects(estimates, variances)
    columns = pool_checked(single(y, v), options, ["the synthesis"])
    return _first(columns)


def pool_checked(batch: Batch, options: Options, labels: Sequence[object]) -> Columns:
    """Pool checked syntheses and refuse numbers that overflowed.

    Parameters
    ----------
    batch : Batch
        Checked syntheses.
    options : Options
        Checked options.
    labels : sequence
        Name of each synthesis, for the error.

    Returns
    -------
    dict
        One array for each field of `PooledEffect`.

    Raises
    ------
    AnalysisError
        A result is not finite.
    """
    with np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore"):
        columns = pool_batch(batch, options, labels)
    check_finite_result((columns["estimate"], columns["standard_error"]), labels)
    return columns


def _first(columns: Columns) -> PooledEffect:
    values: dict[str, Any] = {}
    for name in FIELDS:
        column = columns[name]
        if name == "weights":
            values[name] = column[:, 0]
        elif isinstance(column, np.ndarray):
            values[name] = column[0] if column.dtype == object else column[0].item()
        else:
            values[name] = column
    return PooledEffect(**values)


def pool_many(
    estimates: ArrayLike,
    variances: ArrayLike,
    groups: npt.ArrayLike | pd.Series,
    *,
    model: str = "random",
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    prediction_df: str = "k-2",
) -> pd.DataFrame:
    """Pool many syntheses at once.

    Parameters
    ----------
    estimates, variances : array_like, shape (m,)
        Trials of all syntheses, in any order.
    groups : array_like, shape (m,)
        Which synthesis each trial belongs to.
    model, tau2, interval, level, prediction_df
        As for `pool`.

    Returns
    -------
    DataFrame
        One row for each synthesis, indexed by its group in sorted order, with the fields of `PooledEffect`
        as columns; "weights" holds one array for each row, in the order of the input. Equal to `pool` on
        each synthesis.

    Raises
    ------
    AnalysisError
        As for `pool`; also when a trial has no group.
    """
    options = Options.read(
        model=model, tau2=tau2, interval=interval, level=level, prediction_df=prediction_df
    )
    y, v = check_effects(estimates, variances)
    same_trials(estimates, groups, "estimates and groups")
    counts, names, order = _groups(groups, trial_labels(estimates, y.size))
    if order is not None:
        y, v = y[order], v[order]
    return _frame(_pool_runs(y, v, counts, options, names.tolist()), names)


def _groups(
    groups: npt.ArrayLike | pd.Series, labels: Sequence[object]
) -> tuple[IntArray, pd.Index, IntArray | None]:
    """Trials in each group, the groups, and the order that puts a group's trials together if needed."""
    count = len(labels)
    values = groups if isinstance(groups, pd.Series) else _flat(groups)
    if len(values) != count:
        raise AnalysisError(
            "groups and estimates differ in length.",
            found=f"{len(values)} groups and {count} estimates",
            expected="one group for each estimate",
        )
    if isinstance(values, np.ndarray) and values.dtype.kind in "iu":
        ends = np.concatenate([[0], np.flatnonzero(values[1:] != values[:-1]) + 1, [count]])
        heads = values[ends[:-1]]
        if (heads[1:] > heads[:-1]).all():
            # Sorted whole numbers, the usual case in bulk, need no hashing.
            return ends[1:] - ends[:-1], pd.Index(heads, name="group"), None
    try:
        codes, names = pd.factorize(values, sort=True)
    except TypeError as error:
        raise AnalysisError(
            "groups cannot be told apart and sorted.",
            found=str(error),
            expected="names or numbers",
        ) from error
    if (codes < 0).any():
        at = int(np.argmax(codes < 0))
        raise AnalysisError(
            "group is missing.",
            trial=str(labels[at]),
            found=list(values)[at],
            expected="the synthesis it belongs to",
        )
    order = np.argsort(codes, kind="stable") if (codes[1:] < codes[:-1]).any() else None
    return np.bincount(codes), pd.Index(names, name="group"), order


def _flat(groups: npt.ArrayLike) -> npt.NDArray[Any]:
    """Make groups a one-dimensional array."""
    try:
        # A mixed list would turn 1 and "1" into the same text; pandas keeps them apart.
        values = np.asarray(pd.Index(groups)) if isinstance(groups, list | tuple) else np.asarray(groups)
    except (TypeError, ValueError) as error:
        raise AnalysisError("groups must be one list of names.", found=str(error)) from error
    if values.ndim != 1:
        found = type(groups).__name__ if values.ndim == 0 else f"{values.ndim} dimensions"
        raise AnalysisError(
            "groups must be one list of names.", found=found, expected="one group for each estimate"
        )
    return values


def _pool_runs(
    y: FloatArray, v: FloatArray, counts: IntArray, options: Options, names: list[object]
) -> list[Columns]:
    """Pool consecutive runs of trials, a cache-sized rectangle each, on all cores if there are very many.

    Parts come back in their order and no sum runs over two of them, so the result does not depend on the
    number of cores.
    """
    ends = np.concatenate([[0], np.cumsum(counts)])

    def one(run: slice) -> Columns:
        trials = slice(ends[run.start], ends[run.stop])
        batch = pack(y[trials], v[trials], counts[run])
        columns = pool_checked(batch, options, names[run])
        columns["weights"] = split_weights(columns["weights"], counts[run])
        return columns

    runs = list(chunks(counts))
    workers_wanted = min(len(runs), cores()) if y.size >= WORTH_THREADS else 1
    if workers_wanted == 1:
        return [one(run) for run in runs]
    with ThreadPoolExecutor(workers_wanted) as workers:
        return list(workers.map(one, runs))


def cores() -> int:
    """Cores that this process may use, which can be fewer than the machine has."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _frame(parts: list[Columns], names: pd.Index) -> pd.DataFrame:
    return pd.DataFrame(join(parts, FIELDS), index=names, copy=False)
