"""Futility bounds: the definition by simulation, the meeting at the end, and their cost."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from treering.errors import AnalysisError
from treering.monitoring import (
    beta_spent,
    boundaries,
    crossing_probabilities,
    futility_boundaries,
    next_futility_bound,
)


def simulated(found, sides, runs, seed):
    """Cumulative futility stops and power over seeded paths that obey both bounds."""
    rng, t = np.random.default_rng(seed), found.fractions
    left, stopped, crossed = np.zeros(runs, dtype=bool), [], 0
    score = np.zeros(runs)
    for look, step in enumerate(np.diff(t, prepend=0.0)):
        score += rng.standard_normal(runs) * math.sqrt(step) + found.drift * step
        z = score / math.sqrt(t[look])
        extent = np.abs(z) if sides == 2 else z
        high = ~left & (extent >= found.efficacy_z[look])
        low = ~left & ~high & (extent < found.z[look])
        crossed += high.sum()
        stopped.append(low.sum())
        left |= high | low
    return np.cumsum(stopped) / runs, crossed / runs


def plan_of(case):
    return futility_boundaries(case["data"]["t"], **case["params"])


@pytest.mark.slow
@pytest.mark.parametrize("name", ["FU01", "FU02"])
def test_four_million_paths_spend_beta_and_reach_the_power(published, agrees, name):
    case = published[name]
    found = plan_of(case)
    spent, power = simulated(found, case["params"]["sides"], 4_000_000, 20310104)
    agrees(
        case,
        {
            **{f"cum_beta[{look}]": value for look, value in enumerate(spent)},
            "power": power,
            "last_meets": abs(found.z[-1] - found.efficacy_z[-1]),
        },
    )


@pytest.mark.parametrize("name", ["FU01", "FU02"])
def test_simulated_paths_spend_beta_as_the_function_says(published, name):
    # 200,000 seeded paths; tolerance four Monte Carlo standard errors (0.0009 each at most).
    case = published[name]
    found = plan_of(case)
    spent, power = simulated(found, case["params"]["sides"], 200_000, 20310105)
    wanted = [case["expected"][f"cum_beta[{look}]"] for look in range(spent.size)]
    assert spent == pytest.approx(wanted, abs=0.0036)
    assert power == pytest.approx(case["expected"]["power"], abs=0.0036)


@settings(max_examples=25, deadline=None)
@given(
    inner=st.lists(st.floats(0.05, 0.95), max_size=5, unique=True).map(sorted),
    alpha=st.floats(0.01, 0.2),
    beta=st.floats(0.03, 0.4),
    sides=st.sampled_from([1, 2]),
)
def test_futility_meets_efficacy_at_the_end_never_before_and_leaves_efficacy_alone(inner, alpha, beta, sides):
    t = np.array([*inner, 1.0])
    found = futility_boundaries(t, alpha=alpha, beta=beta, sides=sides)
    assert found.z[-1] == found.efficacy_z[-1]
    assert np.all(found.z <= found.efficacy_z)
    single = stats.norm.isf(alpha / sides)  # one test at the end misses with this chance, either side counted
    assert (
        stats.norm.cdf(single - found.drift) - (sides == 2) * stats.norm.cdf(-single - found.drift)
        < beta + 1e-9
    )
    assert np.array_equal(found.efficacy_z, boundaries(t, alpha=alpha, sides=sides).z)
    lower, wedge = (-found.efficacy_z, found.z) if sides == 2 else (found.z, None)
    crossing = crossing_probabilities(t, found.efficacy_z, lower=lower, inner=wedge, drift=found.drift)
    missed = crossing.inner.sum() if sides == 2 else crossing.lower.sum()
    assert missed == pytest.approx(beta, abs=1e-9)


def test_one_look_needs_the_drift_of_a_single_test():
    # z(0.975) + z(0.9) = 3.2415 (normal quantiles by scipy).
    found = futility_boundaries([1.0], beta=0.1)
    assert found.drift == pytest.approx(stats.norm.isf(0.025) + stats.norm.isf(0.1), abs=1e-6)
    assert found.inflation == pytest.approx(1.0, abs=1e-6)


def test_looks_before_the_end_of_information_plan_a_last_look_at_1():
    early = futility_boundaries([0.2, 0.6])
    whole = futility_boundaries([0.2, 0.6, 1.0])
    assert early.z == pytest.approx(whole.z[:2], abs=1e-9)
    assert early.drift == pytest.approx(whole.drift)


def test_after_the_required_information_there_is_no_futility_bound():
    found = futility_boundaries([0.5, 1.2, 1.4])
    assert found.z[1] == found.efficacy_z[1]
    assert found.z[2] == -math.inf
    assert found.beta_spent == pytest.approx([beta_spent([0.5])[0], 0.1, 0.1])


@pytest.mark.parametrize("sides", [1, 2])
def test_taking_the_looks_one_by_one_gives_the_same_futility_bounds(sides):
    t = np.array([0.13, 0.31, 0.34, 0.72, 1.0])
    whole = futility_boundaries(t, beta=0.2, sides=sides)
    for look in range(t.size):
        found = next_futility_bound(
            t[: look + 1] * 50.0,
            whole.efficacy_z[: look + 1],
            whole.z[:look],
            cumulative_beta=whole.beta_spent[look],
            drift=whole.drift / math.sqrt(50.0),
            sides=sides,
        )
        assert found == pytest.approx(whole.z[look], abs=1e-7)


def test_when_beta_is_used_up_there_is_no_further_futility_bound():
    found = next_futility_bound([0.5, 0.6], [3.0, 2.8], [1.5], cumulative_beta=0.001, drift=3.24)
    assert found == -math.inf


@pytest.mark.parametrize("wrong", [{"beta": 0.0}, {"beta": 0.96}, {"alpha": 0.6}, {"fractions": [0.5, 0.4]}])
def test_a_futility_plan_that_cannot_hold_is_refused(wrong):
    with pytest.raises(AnalysisError) as refusal:
        futility_boundaries(**{"fractions": [0.5, 1.0], **wrong})
    assert refusal.value.next_step


def test_futility_bounds_that_do_not_fit_the_looks_are_refused():
    with pytest.raises(AnalysisError, match="do not fit"):
        next_futility_bound([0.5, 0.6], [3.0], [0.5], cumulative_beta=0.01, drift=3.0)
