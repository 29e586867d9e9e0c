"""Time of one one-stage fit of 50 trials with rare events: under half a second of processor time."""

from __future__ import annotations

import time

import numpy as np
import pandas as pd
import pytest
from scipy.special import expit

from treering.pooling.one_stage import pool_one_stage
from treering.pooling.one_stage_models import OneStageModel


@pytest.fixture(scope="module")
def fifty_trials() -> pd.DataFrame:
    """Seeded trials with risks near 2%: single zeros and double zeros occur."""
    rng = np.random.default_rng(50)
    intercept, theta = rng.normal(-4.0, 0.7, 50), rng.normal(-0.4, 0.5, 50)
    total = rng.integers(40, 400, 50)
    return pd.DataFrame(
        {
            "intervention_events": rng.binomial(total, expit(intercept + theta / 2)),
            "intervention_total": total,
            "comparator_events": rng.binomial(total, expit(intercept - theta / 2)),
            "comparator_total": total,
        }
    )


@pytest.mark.bench
@pytest.mark.benchmark(timer=time.process_time)  # other jobs on the machine do not count
@pytest.mark.parametrize("model", list(OneStageModel))
def test_fifty_rare_event_trials_fit_in_half_a_second(
    benchmark, fifty_trials: pd.DataFrame, model: str
) -> None:
    fit = benchmark.pedantic(pool_one_stage, args=(fifty_trials, model), rounds=5, warmup_rounds=1)
    assert fit.k_double_zero > 0
    assert benchmark.stats.stats.min < 0.5
