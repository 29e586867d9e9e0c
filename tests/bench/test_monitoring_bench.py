"""Bounds against the multivariate normal route, in one run and on one core."""

import time

import numpy as np
import pytest
from scipy import stats

from treering.monitoring import boundaries, crossing_probabilities, futility_boundaries

pytestmark = pytest.mark.bench


def best_of(repeats, function):
    times = []
    for _ in range(repeats):
        begun = time.perf_counter()
        function()
        times.append(time.perf_counter() - begun)
    return min(times)


def test_52_weekly_looks(benchmark):
    fractions = np.arange(1, 53) / 52
    benchmark(boundaries, fractions)
    if benchmark.stats is not None:
        assert benchmark.stats.stats.min < 0.050  # the least disturbed round on a shared machine


def test_52_weekly_looks_with_futility(benchmark):
    benchmark(futility_boundaries, np.arange(1, 53) / 52)


def test_a_trial_that_brings_almost_nothing(benchmark):
    benchmark(boundaries, [0.3, 0.5, 0.5 + 1e-7, 0.8, 1.0])


def test_300_times_the_multivariate_normal_route_at_20_looks():
    # One chance to cross at 20 looks. At 2 million points scipy is off by about 1e-6 to 1e-5, the
    # recursion by less than 1e-10, so accuracy favours the slower route.
    fractions = np.arange(1, 21) / 20
    z = boundaries(fractions).z
    correlation = np.sqrt(np.minimum.outer(fractions, fractions) / np.maximum.outer(fractions, fractions))

    def peer():
        return 1.0 - stats.multivariate_normal.cdf(
            z,
            np.zeros(20),
            correlation,
            lower_limit=-z,
            maxpts=2_000_000,
            abseps=1e-9,
            releps=1e-9,
            rng=np.random.default_rng(1),
        )

    def ours():
        return crossing_probabilities(fractions, z, lower=-z).total

    assert ours() == pytest.approx(0.05, abs=1e-10)
    assert peer() == pytest.approx(0.05, abs=3e-5)
    ratio = best_of(1, peer) / best_of(20, ours)
    print(f"multivariate normal over recursion at 20 looks: {ratio:.0f}")
    assert ratio >= 300
