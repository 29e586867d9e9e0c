"""Absolute effects against the handbook's worked figures and identities."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from treering.errors import AnalysisError
from treering.pooling import pool
from treering.pooling.absolute import absolute_effects, distance


def log(*values: float) -> tuple[float, float, float]:
    low, middle, high = sorted(math.log(v) for v in values)
    return middle, low, high


@pytest.mark.parametrize(
    ("measure", "ratio", "fewer"),
    [
        # Cochrane Handbook 5.1, 12.5.4: RR 0.92 at risk 0.3 gives 24 fewer per 1000, OR 0.73 gives 62 fewer
        # (from memory, firm)
        ("risk-ratio", 0.92, 24),
        ("odds-ratio", 0.73, 62),
    ],
)
def test_the_worked_figures_of_the_handbook(measure: str, ratio: float, fewer: int) -> None:
    (found,) = absolute_effects(log(ratio, 0.5, 1.1), measure, 0.3)
    assert found.difference == pytest.approx(-fewer, abs=0.5)


def test_hazard_ratio_agrees_with_exponential_survival() -> None:
    # constant hazards: risk by time 1 is 1 - exp(-hazard), scipy.stats.expon
    hazard = 0.4
    risk = stats.expon.cdf(1, scale=1 / hazard)
    (found,) = absolute_effects(log(0.7, 0.5, 0.9), "hazard-ratio", risk)
    assert found.intervention == pytest.approx(1000 * stats.expon.cdf(1, scale=1 / (0.7 * hazard)), rel=1e-12)


@given(risk=st.floats(0.001, 0.999), ratio=st.floats(0.05, 20))
def test_odds_ratio_gives_back_its_own_odds(risk: float, ratio: float) -> None:
    (found,) = absolute_effects(log(ratio, ratio / 2, ratio * 2), "odds-ratio", risk, per=1)
    odds = found.intervention / (1 - found.intervention)
    assert odds / (risk / (1 - risk)) == pytest.approx(ratio, rel=1e-6)


@given(risk=st.floats(0.001, 0.999), measure=st.sampled_from(["risk-ratio", "odds-ratio", "hazard-ratio"]))
def test_no_effect_is_no_difference(risk: float, measure: str) -> None:
    (found,) = absolute_effects((0.0, 0.0, 0.0), measure, risk)
    assert found.difference == pytest.approx(0.0, abs=1e-9)


def test_limits_keep_their_order_and_several_risks_are_given_in_order() -> None:
    effect = pool(np.log([0.6, 0.9, 0.7]), [0.02, 0.03, 0.04])
    first, second = absolute_effects(effect, "risk-ratio", [0.1, 0.2])
    assert first.comparator_risk == 0.1
    assert first.difference_low < first.difference < first.difference_high
    assert second.difference == pytest.approx(2 * first.difference)


def test_a_risk_above_one_is_cut_and_says_so() -> None:
    (found,) = absolute_effects(log(2.0, 1.5, 3.0), "risk-ratio", 0.45)
    assert found.intervention_high == 1000
    assert found.cut
    (whole,) = absolute_effects(log(2.0, 1.5, 2.1), "risk-ratio", 0.45)
    assert not whole.cut


def test_risk_difference_is_added() -> None:
    (found,) = absolute_effects((-0.03, -0.05, -0.01), "risk-difference", 0.2, per=100)
    assert (found.difference, found.difference_low, found.difference_high) == pytest.approx((-3, -5, -1))


@pytest.mark.parametrize(
    ("effect", "measure", "risk", "words"),
    [
        ((0.0, -1.0, 1.0), "mean-difference", 0.1, "no absolute effect"),
        ((0.0, -1.0, 1.0), "risk-ratio", 0.0, "strictly between"),
        ((0.0, -1.0, 1.0), "risk-ratio", 100, "strictly between"),
        ((2.0, -1.0, 1.0), "risk-ratio", 0.1, "does not hold"),
        ((math.nan, -1.0, 1.0), "risk-ratio", 0.1, "does not hold"),
    ],
)
def test_unusable_input_is_refused(effect: tuple, measure: str, risk: float, words: str) -> None:
    with pytest.raises(AnalysisError, match=words):
        absolute_effects(effect, measure, risk)


@pytest.mark.parametrize(
    ("value", "measure", "expected"),
    [
        (0.8, "risk-ratio", -math.log(0.8)),
        (1.25, "odds-ratio", math.log(1.25)),
        (-2.0, "mean-difference", 2.0),
    ],
)
def test_a_minimally_important_difference_is_a_distance(value: float, measure: str, expected: float) -> None:
    assert distance(value, measure) == pytest.approx(expected)


@pytest.mark.parametrize(
    ("value", "measure"),
    [
        (1.0, "risk-ratio"),
        (0.0, "risk-ratio"),
        (-1.0, "odds-ratio"),
        (0.0, "mean-difference"),
        (1.0, "magic"),
    ],
)
def test_what_is_no_distance_is_refused(value: float, measure: str) -> None:
    with pytest.raises(AnalysisError):
        distance(value, measure)


@pytest.mark.parametrize("measure", ["risk-ratio", "odds-ratio", "hazard-ratio"])
def test_a_limit_beyond_floating_point_is_cut_at_everyone(measure: str) -> None:
    (found,) = absolute_effects((0.1, 0.0, 800.0), measure, 0.1)
    assert found.intervention_high == pytest.approx(1000)


@pytest.mark.parametrize(
    ("effect", "risk", "options", "words"),
    [
        (None, 0.1, {}, "An effect is"),
        (("a", 0.0, 0.2), 0.1, {}, "trial 1: effect must be numbers"),
        ((0.1, 0.2), 0.1, {}, "does not hold"),
        ((0.1, 0.0, 0.2), "ten", {}, "comparator_risk must be numbers"),
        ((0.1, 0.0, 0.2), [0.1, None], {}, "comparator_risk"),
        ((0.1, 0.0, 0.2), 0.1, {"per": math.nan}, "number of people"),
    ],
)
def test_what_is_no_effect_or_risk_is_refused(
    effect: object, risk: object, options: dict, words: str
) -> None:
    with pytest.raises(AnalysisError, match=words):
        absolute_effects(effect, "risk-ratio", risk, **options)
