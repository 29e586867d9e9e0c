"""Subgroups and interaction against published values, identities and statsmodels."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from treering.errors import AnalysisError
from treering.pooling import pool
from treering.pooling.credibility import SUBGROUP_QUESTIONS, SubgroupAnswer, SubgroupCredibility
from treering.pooling.interaction import interaction_test
from treering.pooling.regression import meta_regression
from treering.pooling.subgroups import subgroup_analysis

# Borenstein, Hedges, Higgins and Rothstein 2009, ch. 19 (fictional), Hedges g and variance, from memory
A, VA = [0.11, 0.224, 0.338, 0.451, 0.48], [0.01, 0.03, 0.02, 0.015, 0.01]
B, VB = [0.44, 0.492, 0.651, 0.71, 0.74], [0.015, 0.02, 0.015, 0.025, 0.012]
Y, V, G = np.array(A + B), np.array(VA + VB), ["A"] * 5 + ["B"] * 5


def test_common_effect_subgroups_agree_with_the_published_example() -> None:
    # same chapter, from memory (firm): A 0.3241, B 0.6111; Q 8.4316, 4.5429, total 26.4371, between 13.4626
    found = subgroup_analysis(Y, V, G, model="common")
    a, b = found.groups
    assert (a.estimate, b.estimate) == pytest.approx((0.3241, 0.6111), abs=6e-5)
    assert (a.q, b.q) == pytest.approx((8.4316, 4.5429), abs=6e-5)
    assert (found.q_total, found.test) == pytest.approx((26.4371, 13.4626), abs=6e-5)


def test_random_effects_subgroups_agree_with_the_published_example() -> None:
    # same chapter, from memory (firm): separate T2 0.0164 and 0.0022, Q* 8.0547, P 0.0045; pooled T2 0.0097,
    # Q* 7.8324, P 0.0051
    separate = subgroup_analysis(Y, V, G, tau2="dersimonian-laird", interval="wald")
    assert [g.tau2 for g in separate.groups] == pytest.approx([0.0164, 0.0022], abs=6e-5)
    assert (separate.test, separate.test_p) == pytest.approx((8.0547, 0.0045), abs=1e-4)
    common = subgroup_analysis(Y, V, G, tau2="dersimonian-laird", interval="wald", between_variance="common")
    assert [g.tau2 for g in common.groups] == pytest.approx([0.0097, 0.0097], abs=6e-5)
    assert (common.test, common.test_p) == pytest.approx((7.8324, 0.0051), abs=1e-4)


@given(
    st.lists(st.tuples(st.floats(-2, 2), st.floats(0.01, 2), st.sampled_from("xyz")), min_size=4, max_size=20)
)
@settings(max_examples=60, deadline=None)
def test_q_splits_exactly_into_within_and_between(trials: list[tuple[float, float, str]]) -> None:
    # identity: Hedges and Olkin 1985
    y, v, groups = (list(column) for column in zip(*trials, strict=True))
    if len(set(groups)) < 2:
        groups[0] = "other"
    found = subgroup_analysis(y, v, groups, model="common")
    within = sum(
        pool(*_of(y, v, groups, name), model="common").q for name in set(groups) if groups.count(name) > 1
    )
    assert found.q_within == pytest.approx(within, abs=1e-8)
    assert found.q_between == pytest.approx(found.test, abs=1e-8)
    assert found.q_total == pytest.approx(found.q_within + found.test, abs=1e-8)


def _of(y: list[float], v: list[float], groups: list[str], name: str) -> tuple[list[float], list[float]]:
    inside = [g == name for g in groups]
    return [a for a, i in zip(y, inside, strict=True) if i], [a for a, i in zip(v, inside, strict=True) if i]


def test_common_variance_is_the_regression_on_an_indicator() -> None:
    found = subgroup_analysis(Y, V, G, between_variance="common")
    regression = meta_regression(Y, V, {"b": [0] * 5 + [1] * 5})
    assert found.groups[0].tau2 == pytest.approx(regression.tau2, abs=1e-10)
    assert found.difference.difference == pytest.approx(-regression.coefficients[1].estimate, abs=1e-10)
    assert found.test_p == pytest.approx(regression.coefficients[1].p, abs=1e-10)
    assert found.test == pytest.approx(found.difference.z**2, rel=1e-9)


def test_common_variance_f_test_of_three_groups_is_that_of_weighted_least_squares() -> None:
    rng = np.random.default_rng(3)
    y, v, g = rng.normal(0, 1, 15), rng.uniform(0.05, 0.3, 15), list("aaaaabbbbbccccc")
    found = subgroup_analysis(y, v, g, between_variance="common", interval="knapp-hartung")
    dummies = pd.get_dummies(pd.Series(g), drop_first=True).to_numpy(float)
    peer = sm.WLS(y, sm.add_constant(dummies), weights=1 / (v + found.groups[0].tau2)).fit()
    assert found.test == pytest.approx(peer.fvalue, rel=1e-7)
    assert found.test_p == pytest.approx(peer.f_pvalue, rel=1e-7)


def test_separate_variances_give_what_pool_gives_within_each_group() -> None:
    found = subgroup_analysis(Y, V, G)
    alone = pool(A, VA)
    assert found.groups[0].estimate == pytest.approx(alone.estimate, abs=1e-12)
    assert found.groups[0].ci_high == pytest.approx(alone.ci_high, abs=1e-12)


def test_two_separate_groups_compared_by_chi_square_and_by_z_agree() -> None:
    found = subgroup_analysis(Y, V, G)
    assert found.test == pytest.approx(found.difference.z**2, rel=1e-10)
    assert found.test_p == pytest.approx(found.difference.p, rel=1e-9)
    assert found.test_p == pytest.approx(stats.chi2.sf(found.test, 1), rel=1e-12)


def test_interaction_of_two_published_relative_risks() -> None:
    # Altman and Bland 2003, BMJ 326:219: 0.67 (0.46 to 0.98) and 0.88 (0.71 to 1.08): difference -0.2726,
    # SE 0.2206, z -1.24, P 0.2, ratio 0.76 (0.49 to 1.17) (difference and SE seen, the rest from memory)
    found = interaction_test((0.67, 0.46, 0.98), (0.88, 0.71, 1.08), "risk-ratio")
    assert found.difference == pytest.approx(-0.2726, abs=1e-4)
    assert found.standard_error == pytest.approx(0.2206, abs=3e-4)
    assert found.z == pytest.approx(-1.24, abs=0.006)
    assert found.p == pytest.approx(0.2, abs=0.05)
    shown = [math.exp(x) for x in (found.difference, found.ci_low, found.ci_high)]
    assert shown == pytest.approx([0.76, 0.49, 1.17], abs=0.006)


def test_interaction_refuses_an_interval_without_its_estimate() -> None:
    with pytest.raises(AnalysisError, match="second estimate"):
        interaction_test((0.67, 0.46, 0.98), (1.88, 0.71, 1.08), "risk-ratio")


def test_a_subgroup_of_one_trial_is_kept_and_remarked_on() -> None:
    found = subgroup_analysis([0.1, 0.2, 0.4], [0.1, 0.1, 0.1], ["x", "x", "y"])
    assert found.groups[1].k == 1
    assert any("not estimable: y" in remark for remark in found.remarks)


@pytest.mark.parametrize(
    ("groups", "options", "words"),
    [
        (["a"] * 10, {}, "at least two subgroups"),
        ([*G[:9], None], {}, "trial 10: The subgroup is missing"),
        ([*G[:9], math.nan], {}, "trial 10: The subgroup is missing"),
        (G[:9], {}, "differ in length"),
        (G, {"between_variance": "shared"}, "between_variance"),
        (list("abcdefghij"), {"between_variance": "common"}, "too few trials"),
    ],
)
def test_unusable_subgroups_are_refused(groups: list, options: dict, words: str) -> None:
    with pytest.raises(AnalysisError, match=words):
        subgroup_analysis(Y, V, groups, **options)


def judgement(**changes: object) -> SubgroupCredibility:
    values = {
        "claim": "Warming helps more in children.",
        "judged_by": "KT",
        "judged_on": "2024-05-01",
        "answers": dict.fromkeys(SUBGROUP_QUESTIONS, SubgroupAnswer.CANNOT_TELL),
        "reasons": {"planned": "Protocol of 2021, section 4."},
        **changes,
    }
    return SubgroupCredibility(**values)


def test_a_credibility_judgement_has_no_overall_word_unless_a_person_gives_one() -> None:
    assert judgement().overall is None
    assert judgement(overall="Not believable yet").overall == "Not believable yet"


@pytest.mark.parametrize(
    "changes",
    [
        {"answers": {"planned": SubgroupAnswer.YES}},
        {"answers": {**dict.fromkeys(SUBGROUP_QUESTIONS, SubgroupAnswer.NO), "luck": SubgroupAnswer.NO}},
        {"answers": dict.fromkeys(SUBGROUP_QUESTIONS, "maybe")},
        {"reasons": {"luck": "none"}},
        {"claim": " "},
        {"judged_by": ""},
    ],
)
def test_an_incomplete_credibility_judgement_is_refused(changes: dict[str, object]) -> None:
    with pytest.raises(AnalysisError):
        judgement(**changes)


def test_published_estimates_without_limits_are_refused() -> None:
    with pytest.raises(AnalysisError, match="second must be"):
        interaction_test((0.67, 0.46, 0.98), (0.88, 0.71), "risk-ratio")
    with pytest.raises(AnalysisError, match="one list of names"):
        subgroup_analysis([0.1, 0.2], [1, 1], None)
