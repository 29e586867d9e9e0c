"""When will we know, and what the next trial must show."""

import json
import math

import numpy as np
import pytest
from scipy.stats import norm

from treering.errors import AnalysisError
from treering.monitoring.forecast import OngoingTrial, forecast
from treering.monitoring.inference import conditional_power
from treering.monitoring.next_trial import next_trial


def numbers(r):
    info = [share * r.plan.required_information for share, _ in r.trials.values()]
    return [z / math.sqrt(i) for (_, z), i in zip(r.trials.values(), info, strict=True)], [
        1 / i for i in info
    ]


def ongoing(r, *shares, end="2031-06-30"):
    return [
        OngoingTrial(trial=f"N{i}", information=share * r.plan.required_information, end=end)
        for i, share in enumerate(shares)
    ]


def test_one_trial_to_the_required_information_gives_conditional_power(review):
    # Lan and Wittes 1988, Biometrics 44:579: a closed form for one look to come.
    r = review()
    look = r.add("A", 0.6, 1.5)
    step = forecast(r.plan, r.looks, *numbers(r), ongoing(r, 0.4), today="2031-02-01").steps[0]
    drift = {
        "no effect": 0.0,
        "effect to detect": norm.isf(0.025) + norm.isf(0.1),
        "present trend": 1.5 / 0.6**0.5,
    }
    for name, theta in drift.items():
        expected = conditional_power(look.z, 0.6, critical_z=step.boundary, drift=theta)
        assert step.benefit[name] == pytest.approx(expected, abs=1e-9)


def test_chances_over_several_looks_are_those_of_simulated_paths(review):
    r = review(diversity=0.2)
    r.add("A", 0.3, 1.2)
    trials = [
        OngoingTrial(trial=f"N{year}", information=share * r.plan.required_information, end=f"{year}-01-01")
        for year, share in ((2032, 0.2), (2033, 0.1), (2033, 0.2), (2034, 0.3))
    ]
    steps = forecast(r.plan, r.looks, *numbers(r), trials, today="2031-02-01").steps
    assert [len(step.trials) for step in steps] == [1, 2, 1], "trials due on one day make one look"
    left = r.plan.required_information * 0.8
    t = np.array([0.3, 0.5, 0.8, 1.1]) * left
    rng = np.random.default_rng(8)
    moves = 0.3 * np.diff(t) + np.sqrt(np.diff(t)) * rng.standard_normal((200_000, 3))
    z = (1.2 * t[0] ** 0.5 + np.cumsum(moves, axis=1)) / np.sqrt(t[1:])
    beyond = np.abs(z) >= np.array([step.boundary for step in steps])
    first = np.where(beyond.any(axis=1), beyond.argmax(axis=1), 3)
    for i, step in enumerate(steps):
        share = np.mean(first <= i)
        assert step.benefit["effect to detect"] == pytest.approx(share, abs=0.005)


def test_the_day_at_which_the_fraction_reaches_one(review):
    r = review()
    r.add("A", 0.5, 1.0)
    trials = [
        OngoingTrial(trial="late", information=0.3 * r.plan.required_information, end="2032-03-01"),
        OngoingTrial(trial="early", information=0.3 * r.plan.required_information, end="2031-03-01"),
        OngoingTrial(trial="overdue", information=0.1 * r.plan.required_information, end="2029-01-01"),
        OngoingTrial(trial="unknown", information=None, end="2031-03-01"),
    ]
    found = forecast(r.plan, r.looks, *numbers(r), trials, today="2031-02-01", lag_days=100)
    assert [step.trials for step in found.steps] == [("overdue",), ("early",), ("late",)]
    assert [step.overdue for step in found.steps] == [("overdue",), (), ()]
    assert found.steps[0].date == "2031-02-01"
    assert found.reaches == found.steps[2].date == "2032-06-09"
    assert found.not_dated == ("unknown",)
    assert json.dumps(found.to_dict(), allow_nan=False)


def test_too_little_is_on_its_way(review):
    r = review()
    r.add("A", 0.5, 1.0)
    assert forecast(r.plan, r.looks, *numbers(r), ongoing(r, 0.1), today="2031-02-01").reaches is None
    nothing = forecast(r.plan, r.looks, *numbers(r), [], today="2031-02-01")
    assert (nothing.steps, nothing.next_trial) == ((), None)


def test_looks_that_cannot_spend_have_no_boundary_and_no_chance(review):
    r = review()
    r.add("A", 0.3, 0.5)
    r.add("B", 0.4, 0.5)
    r.remove("B")
    step = forecast(r.plan, r.looks, *numbers(r), ongoing(r, 0.2), today="2031-02-01").steps[0]
    assert step.boundary is None
    assert set(step.benefit.values()) | set(step.harm.values()) == {0.0}


def test_one_sided_harm_is_forecast_on_its_side_only(review):
    r = review(sides=1, role="harm", better="lower")
    r.add("A", 0.5, 1.5)
    step = forecast(r.plan, r.looks, *numbers(r), ongoing(r, 0.5), today="2031-02-01").steps[0]
    assert set(step.benefit.values()) == {0.0}
    assert step.harm["present trend"] > 0.5


def test_what_the_next_trial_must_show_to_cross_turns_the_next_look(review):
    r = review()
    r.add("A", 0.5, 1.5)
    needed = next_trial(r.plan, r.looks, *numbers(r), information=0.3 * r.plan.required_information)
    looks = list(r.looks)
    for value, verdict in (
        (needed.to_cross_benefit + 1e-6, "benefit boundary crossed"),
        (needed.to_cross_benefit - 1e-6, "accruing"),
        (needed.to_cross_harm - 1e-6, "harm boundary crossed"),
    ):
        r.looks = list(looks)
        r.trials["N"] = (0.3, value * math.sqrt(0.3 * r.plan.required_information))
        assert r.look().verdict == verdict
    assert needed.to_undo is None


@pytest.mark.parametrize(("z", "sign"), [(3.2, 1), (-3.2, -1)])
def test_what_the_next_trial_must_show_to_undo_turns_the_next_look(review, z, sign):
    r = review()
    crossed = r.add("A", 0.5, z).verdict
    needed = next_trial(r.plan, r.looks, *numbers(r), information=0.3 * r.plan.required_information)
    looks = list(r.looks)
    for value, verdict in (
        (needed.to_undo - sign * 1e-6, "crossing no longer supported"),
        (needed.to_undo + sign * 1e-6, crossed),
    ):
        r.looks = list(looks)
        r.trials["N"] = (0.3, value * math.sqrt(0.3 * r.plan.required_information))
        assert r.look().verdict == verdict


def test_a_forecast_needs_a_look_and_readable_dates(review):
    r = review()
    with pytest.raises(AnalysisError, match="starts from a look"):
        forecast(r.plan, [], [], [], [], today="2031-02-01")
    r.add("A", 0.5, 1.0)
    with pytest.raises(AnalysisError, match="date"):
        forecast(r.plan, r.looks, *numbers(r), ongoing(r, 0.2, end="June"), today="2031-02-01")
