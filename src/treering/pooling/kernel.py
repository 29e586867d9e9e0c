"""The one implementation behind `pool`, `pool_many`, leave-one-out and cumulative pooling.

A batch of syntheses goes in, one column for each field of `PooledEffect` comes out.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from treering.pooling.batch import Batch
from treering.pooling.checks import check_finite_result, check_level, choose
from treering.pooling.columns import Columns
from treering.pooling.inference import (
    Inference,
    chi2_quantile,
    heterogeneity_p,
    i2_interval,
    normal_test,
    prediction,
    t_test,
)
from treering.pooling.moments import centre, sums, weigh
from treering.pooling.qroot import solve_q
from treering.pooling.result import (
    COMMON_EFFECT,
    NO_I2_INTERVAL,
    NO_PREDICTION,
    NO_SPREAD,
    ONE_TRIAL,
    FloatArray,
)
from treering.pooling.tau2 import AtZero, estimate_tau2, read_at_zero
from treering.terms import IntervalMethod, PoolingModel, PredictionDf, Tau2

BoolArray = npt.NDArray[np.bool_]


@dataclass(frozen=True)
class Options:
    """Checked options of a pooling; see `pool`."""

    model: PoolingModel
    tau2: Tau2
    interval: IntervalMethod
    level: float
    prediction_df: PredictionDf

    @classmethod
    def read(cls, *, model: str, tau2: str, interval: str, level: float, prediction_df: str) -> Options:
        """Read options written out in words.

        Raises
        ------
        AnalysisError
            A word is not known or the level is not between 0 and 1.
        """
        return cls(
            choose(PoolingModel, model, "model"),
            choose(Tau2, tau2, "tau2"),
            choose(IntervalMethod, interval, "interval"),
            check_level(level),
            choose(PredictionDf, prediction_df, "prediction_df"),
        )

    @property
    def interval_used(self) -> IntervalMethod:
        """Knapp-Hartung allows for an estimated tau2; a common effect has none and stays with Wald."""
        return self.interval if self.model is PoolingModel.RANDOM else IntervalMethod.WALD


def pool_batch(batch: Batch, options: Options, labels: Sequence[object]) -> Columns:
    """Pool every synthesis of a batch.

    Parameters
    ----------
    batch : Batch
        Checked syntheses of at least one trial each.
    options : Options
        Checked options.
    labels : sequence
        Name of each synthesis, for the error.

    Returns
    -------
    dict
        One array for each field of `PooledEffect`; "weights" has shape (n, g).

    Raises
    ------
    AnalysisError
        Numbers too large or too small for double precision.
    """
    centred, origin = centre(batch)
    common = _read_at_zero(centred, options)
    check_finite_result((common.mean, common.q, common.a), labels)
    lone = batch.k < 2.0
    tau2 = _between_trials(centred, common, lone, options)
    chosen = sums(centred, tau2) if tau2.any() else common
    tau2_low, tau2_high = _q_profile(centred, common, tau2, chosen, options.level)
    estimate = origin + chosen.mean
    error, test = _test(estimate, chosen, batch.k, options)
    columns: Columns = {"estimate": estimate, "standard_error": error}
    columns |= {"ci_low": test.low, "ci_high": test.high, "z": test.z, "p": test.p}
    columns |= {"tau2": np.where(lone, np.nan, tau2), "tau2_low": tau2_low, "tau2_high": tau2_high}
    columns |= _heterogeneity(common, batch.k, options.level)
    columns |= {"d2": _diversity(common, chosen, tau2, batch.k)}
    columns |= _prediction(estimate, chosen, tau2, batch.k, options)
    columns |= {"weights": weigh(batch.v, tau2) / chosen.total, "k": batch.k.astype(np.intp)}
    return columns | _words(columns, lone, options)


def _read_at_zero(batch: Batch, options: Options) -> AtZero:
    if options.model is PoolingModel.COMMON:
        return sums(batch, np.zeros(batch.k.size))
    return read_at_zero(batch, options.tau2)


def _between_trials(batch: Batch, common: AtZero, lone: BoolArray, options: Options) -> FloatArray:
    """Tau2; zero where it has no meaning."""
    tau2 = np.zeros(lone.size)
    if options.model is PoolingModel.COMMON or lone.all():
        return tau2
    if not lone.any():
        return estimate_tau2(batch, common, options.tau2)
    several = np.flatnonzero(~lone)
    tau2[several] = estimate_tau2(batch.columns(several), common.columns(several), options.tau2)
    return tau2


def _q_profile(
    batch: Batch, common: AtZero, tau2: FloatArray, chosen: AtZero, level: float
) -> tuple[FloatArray, FloatArray]:
    """Interval of tau2 by Q-profile (Viechtbauer 2007, from memory); NaN for one trial."""
    outside, df = (1.0 - level) / 2.0, np.maximum(batch.k - 1.0, 1.0)
    limits = (
        solve_q(batch, chi2_quantile(df, tail), common, tau2, chosen) for tail in (outside, 1.0 - outside)
    )
    low, high = (np.where(batch.k < 2.0, np.nan, limit) for limit in limits)
    return low, high


def _test(
    estimate: FloatArray, chosen: AtZero, k: FloatArray, options: Options
) -> tuple[FloatArray, Inference]:
    """Return standard error and test (Knapp and Hartung 2003; modified: Roever 2015; both from memory)."""
    ordinary = 1.0 / np.sqrt(chosen.total)
    if options.interval_used is IntervalMethod.WALD:
        return ordinary, normal_test(estimate, ordinary, options.level)
    df = np.maximum(k - 1.0, 1.0)
    factor = chosen.q / df
    if options.interval_used is IntervalMethod.MODIFIED_KNAPP_HARTUNG:
        factor = np.maximum(factor, 1.0)
    lone = k < 2.0
    error = np.where(lone, ordinary, ordinary * np.sqrt(factor))
    test = t_test(estimate, error, df, options.level)
    if lone.any():
        plain = normal_test(estimate, ordinary, options.level)
        test = Inference(*(np.where(lone, a, b) for a, b in zip(plain, test, strict=True)))
    return error, test


def _heterogeneity(common: AtZero, k: FloatArray, level: float) -> Columns:
    df, q = k - 1.0, np.where(k > 1.0, common.q, 0.0)
    estimable = df > 0.0
    low, high = i2_interval(q, df, level)
    excess = np.divide(q - df, q, out=np.zeros_like(q), where=q > df)
    return {
        "q": q,
        "q_df": df,
        "q_p": heterogeneity_p(q, df),
        "i2": np.where(estimable, excess, np.nan),
        "i2_low": low,
        "i2_high": high,
        "h2": np.divide(q, df, out=np.full_like(q, np.nan), where=estimable),
    }


def _diversity(common: AtZero, chosen: AtZero, tau2: FloatArray, k: FloatArray) -> FloatArray:
    """1 - V_common / V_random, the ratio of the sums of weights the other way round; NaN for one trial."""
    # Both sums at tau2 = 0 can differ in their last digit, and a diversity below zero has no meaning.
    share = np.where(tau2 > 0.0, np.maximum(1.0 - chosen.total / common.total, 0.0), 0.0)
    return np.where(k > 1.0, share, np.nan)


def _prediction(
    estimate: FloatArray, chosen: AtZero, tau2: FloatArray, k: FloatArray, options: Options
) -> Columns:
    lost = 2.0 if options.prediction_df is PredictionDf.K_MINUS_2 else 1.0
    df = k - lost if options.model is PoolingModel.RANDOM else np.zeros_like(k)
    low, high = prediction(estimate, 1.0 / chosen.total, tau2, df, options.level)
    return {"prediction_low": low, "prediction_high": high}


def _words(columns: Columns, lone: BoolArray, options: Options) -> Columns:
    """Fields that are not numbers, with a remark wherever a number had to stay open."""
    count = lone.size
    remarks = np.empty(count, dtype=object)
    remarks.fill(())
    common = options.model is PoolingModel.COMMON
    short = np.isnan(columns["prediction_low"]) & ~lone
    for flagged, remark in (
        (lone, ONE_TRIAL),
        (short, COMMON_EFFECT if common else NO_PREDICTION),
        (np.isnan(columns["i2_high"]) & ~lone, NO_I2_INTERVAL),
        (np.isnan(columns["p"]), NO_SPREAD),
    ):
        if flagged.any():
            for at in np.flatnonzero(flagged):
                remarks[at] += (remark,)
    return {
        "model": str(options.model),
        "interval": _interval_words(lone, options),
        "tau2_method": str(options.tau2),
        "level": options.level,
        "remarks": remarks,
    }


def _interval_words(lone: BoolArray, options: Options) -> str | npt.NDArray[np.object_]:
    """One word if it holds for every synthesis, otherwise a word for each."""
    word, plain = str(options.interval_used), str(IntervalMethod.WALD)
    if not lone.any() or word == plain:
        return word
    return np.where(lone, plain, word).astype(object)
