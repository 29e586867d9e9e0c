import math

import numpy as np
import pytest

from treering import effects
from treering.errors import AnalysisError

FIVE = {"minimum": 2, "quartile_1": 7, "quartile_3": 14, "maximum": 25}
RANGE = {"minimum": 2, "maximum": 25}
QUARTILES = {"quartile_1": 7, "quartile_3": 14}


def test_mean_and_sd_wan_2014_wn03(agree):
    found = {}
    for scenario, given in (("S1", RANGE), ("S2", FIVE), ("S3", QUARTILES)):
        result = effects.mean_and_sd_from_summary(10, 40, mean_method="wan", **given)
        assert result.formula == f"mean-wan-sd-wan-{scenario}"
        found |= {f"{scenario}.mean": result["mean"], f"{scenario}.sd": result["sd"]}
    agree("WN03", found)


def test_expected_range_of_a_normal_sample_wan_2014_table_1_wn01(agree):
    agree("WN01", {f"xi[{n}]": effects.expected_range(n) for n in (2, 3, 4, 5, 10, 25, 50)})
    # Closed forms: 2/sqrt(pi) and 3/sqrt(pi).
    assert effects.expected_range(2) == pytest.approx(2 / math.sqrt(math.pi), rel=1e-12)
    assert effects.expected_range(3) == pytest.approx(3 / math.sqrt(math.pi), rel=1e-12)


@pytest.fixture(scope="module")
def samples():
    """Sorted normal samples of size 81 with mean 50 and SD 8 (seeded), one a row."""
    return np.sort(np.random.default_rng(11).normal(50, 8, size=(4000, 81)), axis=1)


def summary_of(sample):
    """Five-number summary of 81 sorted values, which leave no doubt about quartiles."""
    minimum, first, median, third, maximum = sample[[0, 20, 40, 60, 80]]
    return median, {"minimum": minimum, "quartile_1": first, "quartile_3": third, "maximum": maximum}


SCENARIOS = {
    "S1": ("minimum", "maximum"),
    "S2": ("minimum", "maximum", "quartile_1", "quartile_3"),
    "S3": ("quartile_1", "quartile_3"),
}


@pytest.mark.parametrize("scenario", SCENARIOS)
@pytest.mark.parametrize("method", ["luo", "wan"])
def test_mean_and_sd_are_nearly_unbiased_on_simulated_normal_samples(samples, scenario, method):
    found = []
    for sample in samples[:1000]:
        median, summary = summary_of(sample)
        given = {name: summary[name] for name in SCENARIOS[scenario]}
        result = effects.mean_and_sd_from_summary(median, 81, mean_method=method, **given)
        found.append((result["mean"], result["sd"]))
    mean, sd = np.mean(found, axis=0)
    assert mean == pytest.approx(50, abs=0.15)  # standard error of this average about 0.04
    assert sd == pytest.approx(8, rel=0.015)


@pytest.mark.parametrize("scenario", SCENARIOS)
def test_luos_mean_has_a_smaller_error_than_wans_on_normal_samples(samples, scenario):
    # Luo et al. 2018: the weights minimise the mean squared error.
    squares = {"luo": 0.0, "wan": 0.0}
    for sample in samples[:1500]:
        median, summary = summary_of(sample)
        given = {name: summary[name] for name in SCENARIOS[scenario]}
        for method in squares:
            result = effects.mean_and_sd_from_summary(median, 81, mean_method=method, **given)
            squares[method] += (result["mean"] - 50) ** 2
    assert squares["luo"] < 1.001 * squares["wan"]


@pytest.mark.parametrize("scenario", SCENARIOS)
def test_the_skewness_check_calls_one_normal_sample_in_twenty_skewed(samples, scenario):
    # Shi et al. 2020: critical values at the 5% level; 3-SD band of 4,000 seeded samples.
    calls = 0
    for sample in samples:
        median, summary = summary_of(sample)
        given = {name: summary[name] for name in SCENARIOS[scenario]}
        calls += effects.skewness_check(median, 81, **given).skewed
    assert calls / len(samples) == pytest.approx(0.05, abs=3 * math.sqrt(0.05 * 0.95 / len(samples)))


@pytest.mark.parametrize(
    ("given", "mean"), [(RANGE, 10.703326220462), (FIVE, 10.727953544287), (QUARTILES, 10.354875000000)]
)
def test_luos_means_are_those_of_the_printed_formulas(given, mean):
    # Luo et al. 2018, from memory, n = 40 by hand: weights 4/(4 + 40^0.75) of the middle of the range,
    # 0.7 + 0.39/40 of the middle of the quartiles, and 2.2/(2.2 + 40^0.75) with 0.7 - 0.72/40^0.55 for both.
    assert effects.mean_and_sd_from_summary(10, 40, **given)["mean"] == pytest.approx(mean, rel=1e-11)


def test_the_critical_values_are_those_of_the_printed_formulas():
    # Shi et al. 2020, formulas from memory, n = 40 by hand: 1.01/ln 49 + 2.43/41, 2.66/sqrt 40 - 5.92/1600,
    # 2.97/sqrt 40 - 39.1/64000; statistics (2 + 25 - 20)/23 and (7 + 14 - 20)/7, weight 2.65 ln 24/sqrt 40.
    by_range, by_quartiles, by_both = (
        effects.skewness_check(10, 40, **given) for given in (RANGE, QUARTILES, FIVE)
    )
    assert (by_range.statistic, by_range.critical) == pytest.approx((7 / 23, 0.3187869556), rel=1e-9)
    assert (by_quartiles.statistic, by_quartiles.critical) == pytest.approx((1 / 7, 0.4168829288), rel=1e-9)
    assert (by_both.statistic, by_both.critical) == pytest.approx((0.4052726828, 0.4689872950), rel=1e-9)


def test_a_skewed_summary_is_converted_with_a_warning_in_the_record():
    found = effects.mean_and_sd_from_summary(3, 60, quartile_1=2, quartile_3=12)
    assert found["skewness"] > found["skewness_critical"]
    assert "Skewed" in found.remarks[0]
    assert effects.mean_and_sd_from_summary(7, 60, quartile_1=2, quartile_3=12).remarks == ()


@pytest.mark.parametrize(
    ("median", "total", "given", "field"),
    [
        (10, 40, {}, "minimum, quartile_1"),
        (10, 40, {"minimum": 2}, "minimum, maximum"),
        (10, 40, {"quartile_1": 11, "quartile_3": 14}, "median"),
        (15, 40, {"quartile_1": 11, "quartile_3": 14}, "quartile_3"),
        (10, 40, {"quartile_1": 10, "quartile_3": 10}, "median"),
        (10, 40, {"minimum": 2, "maximum": 25, "quartile_1": 10, "quartile_3": 10}, "quartile_1, quartile_3"),
        (10, 3, {"minimum": 2, "maximum": 25}, "total"),
        (10, 40, {"minimum": math.nan, "maximum": 25}, "minimum"),
    ],
)
def test_a_faulty_summary_is_refused_by_trial_and_field(median, total, given, field):
    with pytest.raises(AnalysisError, match=f"trial Alder: {field}: "):
        effects.mean_and_sd_from_summary(median, total, trial="Alder", **given)
