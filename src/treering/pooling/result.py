"""The pooled effect as one frozen value, and the remarks that explain what it could not say."""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

ONE_TRIAL = (
    "One trial pools to itself: its own ordinary (Wald) interval is given; between-trial variance, "
    "heterogeneity and prediction interval are not estimable."
)
NO_PREDICTION = "Prediction interval not estimable: too few trials for the chosen degrees of freedom."
COMMON_EFFECT = (
    "Common-effect model: tau2 is zero by assumption, so there is no prediction interval; the interval is "
    "the ordinary (Wald) one."
)
NO_I2_INTERVAL = "Interval of I2 not estimable: its formula has no value for two trials with Q of 2 or less."
NO_SPREAD = (
    "The estimates do not differ, so the Knapp-Hartung variance is zero and its test is not defined: z and p "
    "are not estimable."
)


@dataclass(frozen=True)
class PooledEffect:
    """Several trials pooled into one effect.

    All effects are on the analysis scale (log for ratios). A number that the data cannot give is NaN, is
    listed in `not_estimable`, and has its reason in `remarks`; no other field is ever NaN.

    Attributes
    ----------
    estimate, standard_error : float
        Pooled effect and the standard error that belongs to `interval`.
    ci_low, ci_high : float
        Confidence interval of the pooled effect at `level`.
    z : float
        Wald: estimate / standard error. Knapp-Hartung kinds: the signed normal quantile of the t test's
        two-sided P value, so that sequential boundaries can be laid on it.
    p : float
        Two-sided P value of the same test.
    tau2, tau2_low, tau2_high : float
        Between-trial variance and its Q-profile interval at `level` (zero by assumption for a common effect,
        where the interval still describes the data).
    q, q_df, q_p : float
        Cochran's Q, its degrees of freedom and P value.
    i2, i2_low, i2_high : float
        (Q - df) / Q cut off at zero, a fraction; interval test-based (Higgins and Thompson 2002).
    h2 : float
        Q / df, not cut off at one.
    d2 : float
        Diversity, 1 - V_common / V_random, both Wald variances (Wetterslev 2009), a fraction.
    prediction_low, prediction_high : float
        Interval for the effect in a new trial.
    weights : ndarray, shape (k,)
        Share of each trial, sum 1, in the order of the input.
    k : int
        Number of trials that carry weight.
    model, interval, tau2_method : str
        What was done; `interval` is the kind used, so "wald" for one trial and for a common effect.
    level : float
        Confidence level of all intervals.
    remarks : tuple of str
        Sentences that a reader of the numbers must also read.
    """

    estimate: float
    standard_error: float
    ci_low: float
    ci_high: float
    z: float
    p: float
    tau2: float
    tau2_low: float
    tau2_high: float
    q: float
    q_df: float
    q_p: float
    i2: float
    i2_low: float
    i2_high: float
    h2: float
    d2: float
    prediction_low: float
    prediction_high: float
    weights: FloatArray
    k: int
    model: str
    interval: str
    tau2_method: str
    level: float
    remarks: tuple[str, ...] = ()

    @property
    def not_estimable(self) -> tuple[str, ...]:
        """Names of the numeric fields that these data cannot give."""
        return tuple(
            field.name
            for field in dataclasses.fields(self)
            if isinstance(value := getattr(self, field.name), float) and math.isnan(value)
        )


FIELDS = tuple(field.name for field in dataclasses.fields(PooledEffect))
