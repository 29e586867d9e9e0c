"""Rules of the ledger that hold whatever happens to the evidence."""

import json
import math

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from treering.monitoring.ledger import ledger_state, next_look
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.pooling import pool
from treering.terms import CROSSED, Verdict

EVENTS = st.lists(
    st.tuples(
        st.sampled_from(["add", "remove", "correct"]),
        st.floats(0.02, 0.5),
        st.floats(-4, 4),
        st.integers(0, 9),
    ),
    min_size=1,
    max_size=8,
)
PLANS = st.sampled_from(
    [
        {"model": "common"},
        {"model": "common", "spending": "pocock", "sides": 1},
        {"interval": "wald", "diversity": 0.3},
        {"spending": "hwang-shih-decani", "alpha": 0.02},
        {
            "role": "harm",
            "sides": 1,
            "better": "lower",
            "spending": "power-family",
            "spending_parameter": 2.0,
        },
    ]
)


def happen(events, fields, keep=lambda look: look):
    """Let trials come, go and change, and look after each change; `keep` stores and reads a look."""
    plan = MonitoringPlan(**({"effect": 0.3, "better": "higher"} | fields))
    trials, looks = {}, []
    for number, (what, share, z, which) in enumerate(events):
        names = list(trials)
        if what == "add" or not names:
            trials[f"T{number}"] = [z / math.sqrt(share * plan.required_information), share]
        elif what == "remove":
            del trials[names[which % len(names)]]
        else:
            trials[names[which % len(names)]][0] += 0.01 + abs(z) / 10
        looks.append(
            next_look(
                plan,
                list(map(keep, looks)),
                date=f"2031-01-{number + 1:02d}",
                version=number + 1,
                trials=list(trials),
                estimates=[y for y, _ in trials.values()],
                variances=[1 / (s * plan.required_information) for _, s in trials.values()],
            )
        )
    return plan, looks


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(events=EVENTS, fields=PLANS)
def test_alpha_is_spent_only_above_the_highest_fraction_and_never_given_back(events, fields):
    plan, looks = happen(events, fields)
    spent, highest, finished = 0.0, 0.0, False
    for look in looks:
        assert spent <= look.alpha_spent <= plan.alpha * (1 + 1e-12)
        if look.spends:
            assert not finished
            assert look.fraction > highest
            highest, finished = look.fraction, look.fraction >= 1.0
        else:
            assert (look.boundary, look.alpha_spent) == (None, spent)
        spent = look.alpha_spent
    assert ledger_state(plan, looks).spent == spent


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(events=EVENTS, fields=PLANS)
def test_a_crossing_comes_only_from_a_look_that_spends_and_is_lost_only_after_one(events, fields):
    _, looks = happen(events, fields)
    before = None
    for look in looks:
        if look.verdict in CROSSED and look.verdict is not before:
            assert look.spends
            assert abs(look.z) >= look.boundary
        if look.verdict is Verdict.NO_LONGER_SUPPORTED:
            assert before in CROSSED or before is Verdict.NO_LONGER_SUPPORTED
        if look.verdict is not Verdict.CANNOT_BE_JUDGED:
            before = look.verdict


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(events=EVENTS, fields=PLANS)
def test_the_ledger_goes_on_the_same_from_stored_looks_of_ten_digits(events, fields):
    _, looks = happen(events, fields)
    _, stored = happen(events, fields, keep=stored_look)
    for look, again in zip(looks, stored, strict=True):
        assert (again.verdict, again.spends) == (look.verdict, look.spends)
        assert again.alpha_spent == pytest.approx(look.alpha_spent, rel=1e-8)
        assert (again.boundary is None) == (look.boundary is None)


def stored_look(look):
    """Store a look as JSON with ten significant digits and read it again."""
    values = {n: float(f"{v:.10g}") if isinstance(v, float) else v for n, v in look.to_dict().items()}
    return Look.from_dict(json.loads(json.dumps(values, allow_nan=False)))


def test_a_given_common_effect_result_is_monitored_like_the_estimates_behind_it():
    # The way in for Mantel-Haenszel and Peto results, whose trials have no usable estimate of their own.
    plan = MonitoringPlan(effect=0.3, better="higher", model="common")
    y, v = np.array([0.2, 0.3, 0.5]), np.array([0.04, 0.05, 0.03])
    head = {"date": "2031-01-01", "version": 1, "trials": ["A", "B", "C"]}
    given_result = next_look(plan, [], **head, pooled=pool(y, v, model="common"))
    from_trials = next_look(plan, [], **head, estimates=y, variances=v)
    assert given_result.z == pytest.approx(from_trials.z)
    assert given_result.information == pytest.approx(from_trials.information)
    assert given_result.boundary == pytest.approx(from_trials.boundary)
    assert given_result.verdict is from_trials.verdict
