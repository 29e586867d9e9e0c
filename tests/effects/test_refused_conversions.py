"""Every conversion refuses every bad figure with one error that names the trial and the field."""

import inspect
import math

import numpy as np
import pandas as pd
import pytest

from treering import effects
from treering.errors import AnalysisError

SUMMARY = {"median": 5, "total": 40, "minimum": 1, "maximum": 9, "quartile_1": 3, "quartile_3": 7}
ARMS = {"intervention_total": 20, "comparator_total": 21}
PAIRS = {
    "intervention_mean": 1,
    "intervention_sd": 1,
    "comparator_mean": 2,
    "comparator_sd": 1,
    "total": 20,
    "correlation": 0.5,
}
# Invented figures that every function takes.
GOOD = {
    "z_from_p": {"p_value": 0.04},
    "standard_error_from_p": {"estimate": 1.4, "p_value": 0.03, "level": 0.95},
    "standard_error_from_interval": {"estimate": 2.0, "ci_low": 1.0, "ci_high": 3.0, "level": 0.95},
    "log_odds_ratio_from_smd": {"smd": 0.3, "variance": 0.02},
    "smd_from_log_odds_ratio": {"log_odds_ratio": 0.3, "variance": 0.02},
    "sd_from_standard_error": {"standard_error": 0.3, "total": 20},
    "sd_from_interval": {"ci_low": 1, "ci_high": 3, "total": 20, "level": 0.95},
    "sd_from_difference_standard_error": {"standard_error": 0.3, **ARMS},
    "sd_from_difference_interval": {"ci_low": 1, "ci_high": 3, **ARMS, "level": 0.95},
    "sd_from_t": {"mean_difference": 1.0, "t_value": 2.0, **ARMS},
    "sd_from_p": {"mean_difference": 1.0, "p_value": 0.02, **ARMS},
    "mean_and_sd_from_summary": SUMMARY,
    "skewness_check": SUMMARY,
    "change_from_baseline": {
        "baseline_mean": 1,
        "baseline_sd": 2,
        "final_mean": 3,
        "final_sd": 2,
        "correlation": 0.5,
    },
    "correlation_from_change": {"baseline_sd": 2, "final_sd": 2, "change_sd": 2},
    "design_effect": {"mean_cluster_size": 20, "intracluster_correlation": 0.02, "size_variation": 0.3},
    "effective_numbers": {"total": 100, "factor": 1.5, "events": 10},
    "inflated_variance": {"variance": 0.1, "factor": 2},
    "paired_mean_difference": PAIRS,
    "paired_standardized_mean_difference": PAIRS,
    "paired_log_odds_ratio": {"both": 3, "intervention_only": 4, "comparator_only": 5, "neither": 6},
}
CALLS = [(name, field) for name, fields in GOOD.items() for field in fields]
NO_NUMBERS = [math.nan, math.inf, -math.inf, 1e200, "x", "3", pd.NA, True, [1.0], np.array([1.0, 2.0]), 1j]


@pytest.mark.parametrize(("name", "field"), CALLS)
def test_a_figure_that_is_no_ordinary_number_is_refused_by_trial_and_field(name, field):
    for bad in NO_NUMBERS:
        with pytest.raises(AnalysisError) as caught:
            getattr(effects, name)(**{**GOOD[name], field: bad}, trial="Birch 2022")
        assert caught.value.trial == "Birch 2022", bad
        assert field in str(caught.value), bad


# Powers of ten from far too small to far too large: a result is finite or refused, never a raw exception.
@pytest.mark.parametrize(("name", "field"), CALLS)
def test_no_size_of_a_figure_brings_out_anything_but_a_finite_result_or_a_refusal(name, field):
    for exponent in (-320, -200, -80, -17, -8, 8, 17, 80, 200, 308):
        for sign in (1, -1):
            try:
                found = getattr(effects, name)(**{**GOOD[name], field: sign * 10.0**exponent})
            except AnalysisError:
                continue
            values = found.result if isinstance(found, effects.Conversion) else vars(found).items()
            assert all(math.isfinite(value) for _, value in values)
            spreads = ("sd", "standard_error", "variance")
            assert all(value > 0 for label, value in values if label in spreads)


# Altman and Bland 2011: -0.862 + sqrt(0.743 - 2.404 log P) falls below zero from P = 0.99998 on.
def test_the_approximate_z_is_refused_where_it_turns_negative():
    assert effects.z_from_p(0.9999, method="approximate")["z"] > 0
    with pytest.raises(AnalysisError, match="p_value"):
        effects.standard_error_from_p(2.0, 0.99999, method="approximate")


@pytest.mark.parametrize("field", ["scale", "method"])
def test_an_unknown_option_is_refused(field):
    with pytest.raises(AnalysisError, match=f"{field}: is unknown"):
        effects.standard_error_from_p(2.0, 0.04, **{field: "square"})


@pytest.mark.parametrize(
    ("call", "field"),
    [
        (lambda bad: effects.small_sample_factor(bad), "degrees_of_freedom"),
        (lambda bad: effects.log_rank_variance(bad, 3.0), "intervention_events"),
        (lambda bad: effects.log_rank_variance(3.0, bad), "comparator_events"),
        (lambda bad: effects.log_rank_variance_by_allocation(bad, 20.0, 20.0), "events"),
        (lambda bad: effects.log_rank_variance_by_allocation(9.0, bad, 20.0), "intervention_total"),
        (lambda bad: effects.log_rank_variance_by_allocation(9.0, 20.0, bad), "comparator_total"),
        (lambda bad: effects.expected_range(bad), "total"),
    ],
)
@pytest.mark.parametrize("bad", [0.0, -1.0, math.nan, math.inf, "x", None])
def test_array_helpers_refuse_what_would_give_nan(call, field, bad):
    with pytest.raises(AnalysisError, match=field):
        call(bad)


@pytest.mark.parametrize("bad", [math.nan, -1.0, "x", None, 1e200])
def test_arms_to_combine_are_checked_one_by_one(bad):
    for field in ("events", "totals"):
        arms = {"events": [1, 2], "totals": [10, 12]}
        arms[field] = [arms[field][0], bad]
        with pytest.raises(AnalysisError, match=f"trial Birch: {field.removesuffix('s')}"):
            effects.combine_binary(**arms, trial="Birch")
    for field in ("sds", "totals"):
        arms = {"means": [1, 2], "sds": [1, 2], "totals": [10, 12]}
        arms[field] = [arms[field][0], bad]
        with pytest.raises(AnalysisError, match=f"trial Birch: {field.removesuffix('s')}"):
            effects.combine_continuous(**arms, trial="Birch")


def test_every_conversion_that_takes_a_trial_is_held_to_these_rules():
    named = {
        name
        for name in effects.__all__
        if inspect.isfunction(getattr(effects, name))
        and {"trial"} <= set(inspect.signature(getattr(effects, name)).parameters)
    }
    assert named - {"combine_binary", "combine_continuous", "split_shared_comparator"} == set(GOOD)


def test_the_record_holds_plain_numbers():
    made = effects.sd_from_standard_error(np.float32(0.5), np.int64(16))
    assert [type(value) for _, value in made.inputs] == [float, float]
