"""Words for an estimate follow from its interval, and from nothing else."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.report import wording

LOG = {"scale": "log", "measure": "risk-ratio", "better": "lower", "mid": math.log(0.8), "unit": ""}
PLAIN = {"scale": "plain", "measure": "mean-difference", "better": "higher", "mid": 1.0, "unit": "points"}


def log_body(low, high, **other):
    middle = (math.log(low) + math.log(high)) / 2
    return {
        **LOG,
        "pooled": {"estimate": middle, "ci_low": math.log(low), "ci_high": math.log(high)},
        **other,
    }


@pytest.mark.parametrize(
    ("low", "high", "words"),
    [
        (0.5, 0.75, "good for patients. Every value in it is at least the smallest difference that matters."),
        (0.6, 0.95, "good for patients. It holds differences that matter and smaller ones."),
        (
            0.85,
            0.98,
            "good for patients. Every value in it is smaller than the smallest difference that matters.",
        ),
        (1.3, 2.0, "bad for patients. Every value in it is at least the smallest difference that matters."),
        (0.7, 1.1, "Compatible with no effect, and with a difference that matters for the better."),
        (0.9, 1.4, "Compatible with no effect, and with a difference that matters for the worse."),
        (0.6, 1.6, "Compatible with no effect, and with differences that matter in both directions."),
        (0.9, 1.1, "Compatible with no effect; every value in the interval is smaller than the smallest"),
    ],
)
def test_the_reading_follows_from_where_the_interval_lies(low, high, words):
    assert words in wording.reading(log_body(low, high))


@given(
    low=st.floats(-3, 3),
    width=st.floats(0, 4),
    mid=st.floats(0.01, 2),
    better=st.sampled_from(["lower", "higher"]),
)
def test_an_interval_over_no_effect_is_compatible_with_it_and_no_other_is(low, width, mid, better):
    body = {
        **LOG,
        "mid": mid,
        "better": better,
        "pooled": {"estimate": low, "ci_low": low, "ci_high": low + width},
    }
    said = wording.reading(body)
    assert said.startswith("Compatible with no effect") == (low <= 0 <= low + width)
    assert "no effect" not in said.replace("ompatible with no effect", "")


def test_an_interval_that_reaches_no_effect_exactly_is_compatible_with_it():
    assert wording.reading(log_body(0.5, 1.0)).startswith("Compatible with no effect")


def test_the_headline_is_the_ordinary_estimate_with_its_interval():
    body = {**PLAIN, "pooled": {"estimate": -0.72, "ci_low": -1.5, "ci_high": 0.09}}
    assert (
        wording.headline(body, 0.95) == "Mean difference \u22120.72 points (95% interval \u22121.50 to 0.09)"
    )
    assert wording.headline({**LOG, "pooled": None}, 0.95) == wording.NO_TRIALS


def test_the_directions_are_built_from_measure_intervention_and_what_is_better():
    assert wording.side_words(LOG, "warming") == (
        "less often with warming (better)",
        "more often with warming (worse)",
    )
    assert wording.side_words(PLAIN, "warming") == (
        "lower with warming (worse)",
        "higher with warming (better)",
    )


def test_the_interval_is_explained_by_repetitions_and_not_as_a_probability_of_the_truth():
    said = wording.explain_interval(0.95)
    assert "covers the true value in 95% of repetitions" in said
    assert "does not say how probable" in said


def test_absolute_effects_are_told_per_thousand_with_the_interval():
    # Closed form: 280 per 1000 times (0.75 - 1) is 70 fewer.
    absolute = {
        "comparator_risk": 0.28,
        "per": 1000,
        "difference": 280 * (0.75 - 1),
        "low": -120.0,
        "high": 14.0,
    }
    said = wording.absolute_words({**LOG, "absolute": absolute}, "warming", "no warming")
    assert said == (
        "With no warming, 280 of 1000 people by the protocol; with warming, 70 fewer per 1000 "
        "(interval 120 fewer to 14 more)."
    )
    assert wording.absolute_words({**LOG, "absolute": None}, "a", "b") is None


def test_a_movement_is_a_factor_for_ratios_and_a_difference_otherwise():
    assert wording.movement_words(math.log(1.072), "log") == "\u00d7 1.072"
    assert wording.movement_words(-0.163, "plain") == "\u22120.163"
    assert wording.movement_words(0.0, "log") == "none"


def test_the_status_line_names_what_was_never_searched():
    facts = {
        "date": "2031-03-10",
        "searches": {"A": "2031-03-09"},
        "planned_sources": {"A": 7, "B": 14},
        "waiting": 1,
    }
    assert wording.status_words(facts) == (
        "living, last run 2031-03-10; A searched to 2031-03-09; no search of B recorded; "
        "1 result waits for verification"
    )
    assert wording.status_words({"text": "retired"}) == "retired"


def test_the_footer_defers_and_recommends_nothing():
    for words in ("informs a panel", "no treatment recommendation", "licensed clinicians", "statistician"):
        assert words in wording.FOOTER


def test_the_page_says_that_nobody_is_counted_twice_or_who_could_not_be_held_against_it():
    from treering.report.outcome import counted_once_words

    arms = {
        "checked": 1,
        "passed": True,
        "refused": [],
        "not_checked": [{"trial": "B", "why": "not recorded"}],
    }
    words = counted_once_words({"arms": arms}, {"B": "Birch"})
    assert words.startswith("1 trial held against what the arms randomised: nobody is counted twice")
    assert words.endswith("not checked: Birch (not recorded).")
    assert counted_once_words({}, {}) == ""
