"""What a crossing rests on."""

import json
import math

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import norm, t

from treering.errors import AnalysisError
from treering.monitoring.dependence import rests_on, z_at
from treering.monitoring.ledger import ledger_state, next_look
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.redrawn import redrawn_value, surely_beyond_redrawn
from treering.pooling import pool


def numbers(r):
    info = [share * r.plan.required_information for share, _ in r.trials.values()]
    y = [z / math.sqrt(i) for (_, z), i in zip(r.trials.values(), info, strict=True)]
    return list(r.trials), y, [1 / i for i in info]


def test_removal_of_the_named_trial_and_of_no_other_loses_the_crossing(review):
    r = review()
    r.add("A", 0.3, 1.5)
    r.add("B", 0.3, 3.0)
    r.add("C", 0.1, 2.95)
    rests = rests_on(r.plan, r.looks, *numbers(r))
    assert rests.sets == (("A",), ("B",))
    trials, ledger = dict(r.trials), list(r.looks)
    for name in "ABC":
        r.trials, r.looks = dict(trials), list(ledger)
        lost = r.remove(name).verdict == "crossing no longer supported"
        assert lost == ((name,) in rests.sets)
    assert "without any one of these" in rests.sentence


def test_pairs_are_searched_when_no_single_trial_undoes_it(review):
    r = review()
    for number, z in enumerate((1.7, 2.4, 2.9, 3.3, 3.7)):
        r.add(f"T{number}", 0.2, z)
    rests = rests_on(r.plan, r.looks, *numbers(r), largest=4)
    assert len({len(chosen) for chosen in rests.sets}) == 1
    assert rests.searched == len(rests.sets[0]) > 1
    shallow = rests_on(r.plan, r.looks, *numbers(r), largest=1)
    assert shallow.sets == ()
    assert "No removal" in shallow.sentence


def test_the_smallest_null_trial_undoes_the_crossing_and_a_slightly_smaller_one_does_not(review):
    r = review()
    r.add("A", 0.6, 3.2)
    rests = rests_on(r.plan, r.looks, *numbers(r))
    share = rests.null_information / r.plan.required_information
    looks = list(r.looks)
    for factor, verdict in ((1.001, "crossing no longer supported"), (0.999, "benefit boundary crossed")):
        r.looks, r.trials["null"] = list(looks), (share * factor, 0.0)
        assert r.look().verdict == verdict


def test_tau2_at_which_a_wald_crossing_of_equal_trials_is_lost_has_a_closed_form():
    # Equal variances v: Z = mean sqrt(k / (v + tau2)), so it is lost at tau2 = k mean^2 / c^2 - v.
    y, v = np.full(6, 0.5) + np.array([-0.05, 0.05] * 3), np.full(6, 0.1)
    plan = MonitoringPlan(effect=0.5, better="higher", interval="wald")
    look = next_look(plan, [], date="2031-01-01", version=1, trials="ABCDEF", estimates=y, variances=v)
    rests = rests_on(plan, [look], "ABCDEF", y, v)
    assert rests.tau2_lost == pytest.approx(6 * 0.25 / look.boundary**2 - 0.1, rel=1e-8)


def test_z_at_the_estimated_tau2_is_the_planned_z():
    rng = np.random.default_rng(4)
    y, v = rng.normal(0.4, 0.4, 8), rng.uniform(0.02, 0.2, 8)
    for interval in ("wald", "knapp-hartung", "modified-knapp-hartung"):
        pooled = pool(y, v, interval=interval)
        plan = MonitoringPlan(effect=0.3, interval=interval)
        assert z_at(plan, y, v, pooled.tau2) == pytest.approx(pooled.z)


def test_tau2_lost_by_modified_knapp_hartung_solves_the_t_equation():
    y, v = np.array([0.4, 0.5, 0.6, 0.5]), np.full(4, 0.02)
    plan = MonitoringPlan(effect=0.5, better="higher", diversity=0.3)
    look = next_look(plan, [], date="2031-01-01", version=1, trials="ABCD", estimates=y, variances=v)
    assert look.verdict == "benefit boundary crossed"
    critical = t.isf(norm.sf(look.boundary), 3)
    # For so small a spread the Knapp-Hartung factor is below 1: the ordinary variance holds.
    expected = brentq(lambda tau2: 0.5 / math.sqrt((0.02 + tau2) / 4) - critical, 0.0, 5.0)
    assert rests_on(plan, [look], "ABCD", y, v).tau2_lost == pytest.approx(expected, rel=1e-6)


def test_a_futility_crossing_rests_on_trials_too(review):
    r = review(futility=True)
    r.add("A", 0.1, 0.9)
    assert r.add("B", 0.6, 0.1).verdict == "futility boundary crossed"
    rests = rests_on(r.plan, r.looks, *numbers(r))
    assert rests.sets == (("B",),)
    assert rests.sentence == "Rests on B: without it the boundary is not crossed."
    assert rests.tau2_lost is None


def test_the_short_way_to_a_redrawn_boundary_never_contradicts_the_integration(review):
    r = review(spending="pocock")
    for number, z in enumerate((0.5, 1.0, 1.5, 2.0)):
        r.add(f"T{number}", 0.2, z)
    state, need = ledger_state(r.plan, r.looks), r.plan.required_information
    told = 0
    for share in (0.05, 0.2, 0.3, 0.55, 0.79):
        where = (r.plan, state.used, share * need, need, state.available)
        bound = redrawn_value(*where)
        for z in np.linspace(0.0, 4.0, 41):
            sure = surely_beyond_redrawn(*where, z=z)
            told += sure is not None
            assert sure is None or sure == (z >= bound)
    assert told > 150


def test_what_is_not_crossed_rests_on_nothing(review):
    r = review()
    r.add("A", 0.6, 1.0)
    with pytest.raises(AnalysisError, match="Only a crossing"):
        rests_on(r.plan, r.looks, *numbers(r))


def test_the_answer_is_plain_json(review):
    r = review()
    r.add("A", 0.6, 3.2)
    body = rests_on(r.plan, r.looks, *numbers(r)).to_dict()
    assert json.loads(json.dumps(body, allow_nan=False)) == body
