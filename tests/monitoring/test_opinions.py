"""Second opinions beside the declared main rule."""

import json
import math

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import invgamma, norm

from treering.errors import AnalysisError
from treering.monitoring.anytime import mixture_interval
from treering.monitoring.ledger import next_look
from treering.monitoring.opinions import second_opinions
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.prior_tau2 import posterior_mean_tau2


def strip_of(y, v, **fields):
    plan = MonitoringPlan(**({"effect": 0.4, "better": "higher"} | fields))
    names = [f"T{i}" for i in range(len(y))]
    look = next_look(plan, [], date="2031-01-01", version=1, trials=names, estimates=y, variances=v)
    return second_opinions(plan, [look], y, v), look


def test_strong_even_evidence_is_crossed_by_every_rule():
    strip, _ = strip_of(np.full(10, 0.6) + 0.01 * np.arange(10), np.full(10, 0.05))
    assert len(strip.opinions) == 8
    assert {opinion.crossed for opinion in strip.opinions} == {True}
    assert (strip.agree, strip.sentence) == (True, "")


def test_an_ordinary_significance_without_a_crossing_depends_on_the_method():
    strip, look = strip_of(np.array([0.5, 0.2, 0.3, 0.4]), np.full(4, 0.09), model="common")
    by_name = {opinion.name: opinion for opinion in strip.opinions}
    assert look.verdict == "accruing"
    assert (by_name["main rule"].crossed, by_name["plain interval"].crossed) == (False, True)
    assert strip.sentence == "depends on the method"


def test_wald_stands_beside_knapp_hartung_and_the_other_way_round():
    y, v = np.array([0.5, 0.2, 0.3, 0.4]), np.full(4, 0.09)
    planned, _ = strip_of(y, v)
    wald, look = strip_of(y, v, interval="wald")
    assert planned.opinions[1].name == "Wald Z"
    assert planned.opinions[1].statistic == pytest.approx(look.z)
    assert wald.opinions[1].name == "modified Knapp-Hartung Z"


def test_the_mixture_opinion_is_the_interval_seen_from_the_other_side():
    for shift in np.linspace(-0.3, 0.6, 10):
        strip, look = strip_of(np.array([0.5, 0.2, 0.3, 0.4]) + shift, np.full(4, 0.05))
        low, high = mixture_interval(look.estimate, look.standard_error, prior_sd=0.4)
        opinion = next(o for o in strip.opinions if o.name == "anytime-valid mixture")
        assert opinion.crossed == (low > 0 or high < 0)


def test_more_diversity_than_planned_raises_the_bound():
    strip, look = strip_of(np.array([1.2, -0.2, 0.9, 0.3, 1.4]), np.full(5, 0.02))
    opinion = next(o for o in strip.opinions if o.name == "re-estimated diversity")
    assert look.fraction_reestimated < look.fraction
    assert opinion.threshold > look.boundary


def test_one_sided_rules_all_look_to_the_tested_side():
    y, v = np.full(8, 0.6) + 0.01 * np.arange(8), np.full(8, 0.02)
    strip, _ = strip_of(y, v, sides=1, role="harm")
    assert {opinion.crossed for opinion in strip.opinions} == {False}
    strip, _ = strip_of(y, v, sides=1)
    assert {opinion.crossed for opinion in strip.opinions} == {True}


def test_a_look_without_alpha_has_no_boundary_for_any_spending_rule(review):
    r = review()
    r.add("A", 0.4, 1.0)
    r.add("B", 0.3, 1.5)
    look = r.remove("A")
    strip = second_opinions(r.plan, r.looks, [look.estimate], [look.standard_error**2])
    assert look.redrawn_boundary is None
    assert [opinion.threshold for opinion in strip.opinions[:4]] == [None] * 4
    assert not any(opinion.crossed for opinion in strip.opinions[:4])


def test_the_iterated_logarithm_waits_for_information():
    strip, _ = strip_of(np.array([0.5, 0.2]), np.full(2, 2.0))
    opinion = next(o for o in strip.opinions if o.name == "law of the iterated logarithm")
    assert (opinion.statistic, opinion.crossed) == (None, None)


def test_posterior_mean_of_tau2_is_that_of_direct_integration():
    # Restricted likelihood times an inverse-gamma density, integrated by scipy in tau.
    y, v = np.array([0.1, 0.9, -0.4, 0.6]), np.array([0.1, 0.2, 0.15, 0.3])

    def density(tau):
        w = 1 / (v + tau**2)
        mean = np.average(y, weights=w)
        marginal = norm.pdf(y, mean, (v + tau**2) ** 0.5).prod() / math.sqrt(w.sum())
        return marginal * invgamma.pdf(tau**2, 2.0, scale=0.04) * 2 * tau

    total = quad(density, 0, 30, limit=400, points=[0.05, 0.2, 0.5, 1, 3])[0]
    mean = quad(lambda x: x * x * density(x), 0, 30, limit=400, points=[0.05, 0.2, 0.5, 1, 3])[0] / total
    assert posterior_mean_tau2(y, v, prior_mean=0.04) == pytest.approx(mean, rel=2e-3)


def test_one_trial_leaves_the_prior_mean():
    assert posterior_mean_tau2(np.array([0.3]), np.array([0.1]), prior_mean=0.04) == pytest.approx(
        0.04, rel=0.03
    )


def test_no_look_has_no_second_opinion():
    with pytest.raises(AnalysisError, match="no look"):
        second_opinions(MonitoringPlan(effect=0.4), [], [0.1], [0.1])


def test_the_strip_is_plain_json():
    strip, _ = strip_of(np.array([0.5]), np.array([0.2]))
    body = [opinion.to_dict() for opinion in strip.opinions]
    assert json.loads(json.dumps(body, allow_nan=False)) == body
