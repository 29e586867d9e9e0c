"""Time and memory of the simulation: 100,000 reviews of 30 looks with REML and mKH.

Wanted: under 60 s on 2 cores, under 1 GB. The unit is machine-free where it can be: the peer is one call of
`treering.pooling.pool_many` for as many syntheses in the same run.
"""

import os
import resource
import time

import numpy as np
import pandas as pd
import pytest

from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.simulate import simulate
from treering.pooling import pool_many

pytestmark = pytest.mark.bench

REVIEWS, LOOKS, CHUNK = 100_000, 30, 2_000


def design(plan):
    sizes = np.resize([60.0, 200.0, 100.0, 400.0], LOOKS)
    information = tuple(sizes / sizes.sum() * plan.required_information)
    return SimulationDesign(information=information, tau2=(0.1,))


def used(who):
    """Processor seconds and peak megabytes of this process or of its finished children."""
    usage = resource.getrusage(who)
    return usage.ru_utime + usage.ru_stime, usage.ru_maxrss / 1024


def test_reviews_of_30_looks_on_all_cores(benchmark):
    # Processor time, not the clock on the wall: the machine may be shared.
    plan = MonitoringPlan(effect=0.25)
    before = used(resource.RUSAGE_SELF)[0] + used(resource.RUSAGE_CHILDREN)[0]
    result = benchmark.pedantic(
        simulate, (plan, design(plan)), {"reviews": REVIEWS, "effects": (0.0,)}, rounds=1, iterations=1
    )
    (own, parent), (children, child) = used(resource.RUSAGE_SELF), used(resource.RUSAGE_CHILDREN)
    seconds, megabytes = own + children - before, parent + len(os.sched_getaffinity(0)) * child
    benchmark.extra_info |= {"processor_seconds": seconds, "megabytes": megabytes}
    assert result.rows[0].reviews == REVIEWS
    assert megabytes < 1024
    assert seconds / 2 < 60


def test_a_simulated_look_costs_less_than_a_pooled_synthesis(benchmark):
    plan = MonitoringPlan(effect=0.25)
    made = design(plan)
    rng = np.random.default_rng(1)
    v = np.tile(1 / np.array(made.information), CHUNK)
    y = pd.Series(rng.normal(0.0, np.sqrt(v + 0.1)))
    began = time.perf_counter()
    pool_many(y, v, np.repeat(np.arange(CHUNK), LOOKS))
    peer = (time.perf_counter() - began) / CHUNK
    task = {"reviews": CHUNK, "effects": (0.0,), "workers": 1}
    benchmark.pedantic(simulate, (plan, made), task, rounds=3, iterations=1)
    own = benchmark.stats.stats.min / (CHUNK * LOOKS) if benchmark.stats else None
    if own is not None:
        benchmark.extra_info["ratio"] = own / peer
        assert own < peer
