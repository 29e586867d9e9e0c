import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from treering import effects
from treering.errors import AnalysisError

GOOD_COUNTS, GOOD_MEANS = (3, 40, 5, 41), (5, 2, 30, 6, 2, 30)


def refused(table, measure, field, words):
    """The whole table is refused for the second trial, and the message names trial, field and fault."""
    with pytest.raises(AnalysisError) as caught:
        effects.effect_sizes(table, measure)
    message = str(caught.value)
    assert caught.value.trial == "Birch 2022"
    assert field in message
    assert words in message


@pytest.fixture
def second(counts, means, intervals):
    """A table of two trials of which only the second may be at fault."""
    index = ["Alder 2021", "Birch 2022"]
    builders = {4: (counts, GOOD_COUNTS), 6: (means, GOOD_MEANS), 3: (intervals, (0.8, 0.4, 1.6))}

    def table(*row):
        builder, good = builders[len(row)]
        return builder(good, row, index=index)

    return table


@pytest.mark.parametrize("measure", ["risk-ratio", "odds-ratio", "risk-difference", "peto-odds-ratio"])
@pytest.mark.parametrize(
    ("row", "field", "words"),
    [
        ((41, 40, 5, 41), "intervention_events", "is above intervention_total"),
        ((3, 40, 42, 41), "comparator_events", "is above comparator_total"),
        ((-1, 40, 5, 41), "intervention_events", "below zero"),
        ((0, 0, 5, 41), "intervention_total", "not above zero"),
        ((3, 40, 0, 0), "comparator_total", "not above zero"),
        ((np.nan, 40, 5, 41), "intervention_events", "is missing"),
        ((3, np.inf, 5, 41), "intervention_total", "not finite"),
    ],
)
def test_faulty_counts_are_refused(second, measure, row, field, words):
    refused(second(*row), measure, field, words)


@pytest.mark.parametrize("measure", ["mean-difference", "standardized-mean-difference", "ratio-of-means"])
@pytest.mark.parametrize(
    ("row", "field", "words"),
    [
        ((5, -2, 30, 6, 2, 30), "intervention_sd", "below zero"),
        ((5, 2, 30, 6, -1, 30), "comparator_sd", "below zero"),
        ((5, 0, 30, 6, 0, 30), "intervention_sd", "zero in both arms"),
        ((5, 2, 0, 6, 2, 30), "intervention_total", "not above zero"),
        ((5, 2, 30, 6, 2, 1), "comparator_total", "admits no SD"),
        ((5, 2, 30, np.nan, 2, 30), "comparator_mean", "is missing"),
    ],
)
def test_faulty_means_are_refused(second, measure, row, field, words):
    refused(second(*row), measure, field, words)


def test_a_ratio_of_means_needs_means_above_zero(second):
    refused(second(-5, 2, 30, 6, 2, 30), "ratio-of-means", "intervention_mean", "not above zero")


@pytest.mark.parametrize("measure", ["hazard-ratio", "odds-ratio"])
@pytest.mark.parametrize(
    ("row", "field", "words"),
    [
        ((1.7, 0.4, 1.6), "estimate", "outside its interval"),
        ((0.3, 0.4, 1.6), "estimate", "outside its interval"),
        ((0.8, 1.6, 0.4), "ci_low", "not below ci_high"),
        ((0.8, -0.4, 1.6), "ci_low", "not above zero"),
        ((0.8, 0.0, 1.6), "ci_low", "not above zero"),
        ((0.72, 0.51, 1.43), "ci_low, ci_high", "not symmetric"),
        ((1.0, 0.4, 1.6), "ci_low, ci_high", "not symmetric"),
        ((2, 1, 5), "ci_low, ci_high", "not symmetric"),
        ((2, 1, 10), "ci_low, ci_high", "not symmetric"),
        ((0.5, 0.4, 0.9), "ci_low, ci_high", "not symmetric"),
        ((0.99, 0.98, 0.99), "ci_low, ci_high", "not symmetric"),
        ((0.8, np.nan, 1.6), "ci_low", "is missing"),
    ],
)
def test_faulty_ratio_intervals_are_refused(second, measure, row, field, words):
    refused(second(*row), measure, field, words)


# 1 (0 to 4) and 5 (4 to 8) would need all three figures at the very edge of their rounding.
@pytest.mark.parametrize(
    "row", [(-2.0, -3.1, 0.4), (4.0, 0.5, 5.5), (2, 1, 10), (1, 0, 4), (5, 4, 8), (0.2, 0.1, 0.5)]
)
def test_faulty_difference_intervals_are_refused(intervals, row):
    table = intervals((1.0, 0.0, 2.0), row, index=["Alder 2021", "Birch 2022"])
    refused(table, "mean-difference", "ci_low, ci_high", "not symmetric")


@pytest.mark.parametrize("error", [-0.1, 0.0])
def test_a_standard_error_not_above_zero_is_refused(error):
    table = pd.DataFrame(
        {"estimate": [0.1, 0.2], "standard_error": [0.1, error]}, index=["Alder", "Birch 2022"]
    )
    refused(table, "generic", "standard_error", "not above zero")


def test_an_interval_with_an_impossible_level_is_refused(second):
    refused(
        second(0.8, 0.4, 1.6).assign(ci_level=[0.95, 95]), "hazard-ratio", "ci_level", "no confidence level"
    )


def test_a_count_below_zero_is_refused_even_where_a_reported_ratio_stands_in(second):
    table = second(-3, 40, 5, np.nan)
    table[["estimate", "ci_low", "ci_high"]] = [[np.nan] * 3, [0.8, 0.4, 1.6]]
    refused(table, "odds-ratio", "intervention_events", "below zero")


def test_a_text_where_a_number_belongs_is_refused(second):
    table = second(*GOOD_COUNTS).astype(object)
    table.iloc[1, 0] = "three"
    refused(table, "odds-ratio", "intervention_events", "is not a number")


@pytest.mark.parametrize(
    "cell", [pd.Timestamp("2020-03-04"), pd.Timedelta(days=3), True, 3j, "3,5", "1_0", "", [3], b"3"]
)
def test_what_is_no_number_is_refused_in_a_mixed_column(second, cell):
    table = second(*GOOD_COUNTS).astype(object)
    table.at["Birch 2022", "intervention_events"] = cell
    if isinstance(cell, complex):  # pandas turns the whole column complex, so the first trial is at fault too
        table["intervention_events"] = pd.Series([3, cell], index=table.index, dtype=object)
    refused(table, "odds-ratio", "intervention_events", "is not a number")


# A column of dates, durations or truth values is a fault of the spreadsheet, not a count.
@pytest.mark.parametrize("kind", ["datetime64[ns]", "timedelta64[ns]", "bool", "complex128"])
def test_a_column_of_another_kind_is_refused(counts, kind):
    table = counts((3, 40, 5, 41), index=["Alder"]).astype(int)
    table["comparator_events"] = table["comparator_events"].astype(kind)
    with pytest.raises(AnalysisError, match="trial Alder: comparator_events: is not a number"):
        effects.effect_sizes(table, "odds-ratio")


@pytest.mark.parametrize("kind", ["int32", "Int64", "float32", "Float64", "string", "object", "category"])
def test_numbers_of_every_kind_of_column_are_read_alike(counts, kind):
    table = counts((3, 40, 5, 41), (9, 80, 4, 77)).astype(int)
    found = effects.effect_sizes(table.astype(kind), "odds-ratio")
    pd.testing.assert_frame_equal(found, effects.effect_sizes(table, "odds-ratio"))


def test_an_arm_that_is_no_word_is_refused():
    columns = {"p_value": [0.1], "intervention_events": [2], "comparator_events": [3]}
    table = pd.DataFrame(columns, index=["Alder"]).assign(lower_hazard=[["intervention"]])
    with pytest.raises(AnalysisError, match="trial Alder: lower_hazard"):
        effects.effect_sizes(table, "hazard-ratio")


@pytest.mark.parametrize("table", [5, "a table", {"intervention_events": 3}])
def test_what_is_no_table_is_refused(table):
    with pytest.raises(AnalysisError, match="is no table"):
        effects.effect_sizes(table, "odds-ratio")


def test_the_missing_column_named_is_one_of_the_way_that_the_table_comes_nearest(counts):
    only_totals = counts(GOOD_COUNTS)[["intervention_total", "comparator_total"]]
    with pytest.raises(AnalysisError, match=r"^intervention_events: the column is missing"):
        effects.effect_sizes(only_totals, "odds-ratio")
    with pytest.raises(AnalysisError, match=r"^intervention_events: the column is missing"):
        effects.effect_sizes(pd.DataFrame({"title": ["Alder"]}), "odds-ratio")


def test_figures_too_large_to_compute_with_are_refused(second):
    refused(second(5, 1e200, 30, 6, 2, 30), "mean-difference", "variance", "not finite")


# Altman and Bland 2003, BMJ 326:219; Singh, Loke and Furberg 2007: intervals as printed in these papers.
@pytest.mark.parametrize(
    "row", [(0.67, 0.46, 0.98), (0.88, 0.71, 1.08), (2.27, 1.06, 4.87), (1.83, 0.88, 3.81)]
)
def test_printed_intervals_pass_with_their_rounding(intervals, row):
    assert np.isfinite(effects.effect_sizes(intervals(row), "hazard-ratio").to_numpy()).all()


# Invented: a precise ratio, a ratio with one decimal, a large ratio in whole numbers, a ratio with fewer
# decimals than its limits.
@pytest.mark.parametrize("row", [(0.95, 0.93, 0.98), (1.5, 1.1, 2.0), (15, 4, 60), (0.67, 0.455, 0.983)])
def test_coarse_but_honest_ratios_pass(intervals, row):
    assert np.isfinite(effects.effect_sizes(intervals(row), "hazard-ratio").to_numpy()).all()


def test_fewer_decimals_of_the_estimate_do_not_excuse_a_lopsided_interval(second):
    # The middle of the limits is 1.051, a quarter of the half-width above 1.0.
    refused(second(1.0, 0.85, 1.30), "hazard-ratio", "ci_low, ci_high", "not symmetric")


def test_an_interval_in_a_narrow_float_type_is_read_by_its_printed_digits(intervals):
    narrow = effects.effect_sizes(intervals((0.72, 0.51, 1.01)).astype("float32"), "hazard-ratio")
    wide = effects.effect_sizes(intervals((0.72, 0.51, 1.01)), "hazard-ratio")
    pd.testing.assert_frame_equal(narrow, wide)


def test_a_difference_rounded_to_one_decimal_passes(intervals):
    assert effects.effect_sizes(intervals((0.2, 0.1, 0.4)), "mean-difference")["estimate"].tolist() == [0.2]


# From a standard error of 0.06 on, two decimals never move the middle by half of the half-width.
@settings(deadline=None, max_examples=100)
@given(centre=st.floats(-1.5, 1.5), error=st.floats(0.06, 0.6), decimals=st.integers(2, 4))
def test_an_honest_interval_rounded_to_its_printed_digits_is_never_refused(centre, error, decimals):
    limits = np.exp([centre, centre - 1.96 * error, centre + 1.96 * error]).round(decimals)
    table = pd.DataFrame([limits], columns=["estimate", "ci_low", "ci_high"])
    found = effects.effect_sizes(table, "hazard-ratio").iloc[0]
    assert found["estimate"] == pytest.approx(np.log(limits[0]))


# Many journals print ratios to three significant digits: 2.61 (0.512 to 13.3) has limits of unlike decimals.
@settings(deadline=None, max_examples=200)
@given(centre=st.floats(-1.5, 1.5), error=st.floats(0.06, 1.5))
def test_an_honest_interval_of_three_significant_digits_is_never_refused(centre, error):
    limits = [float(f"{np.exp(x):.3g}") for x in (centre, centre - 1.96 * error, centre + 1.96 * error)]
    table = pd.DataFrame([limits], columns=["estimate", "ci_low", "ci_high"])
    assert np.isfinite(effects.effect_sizes(table, "hazard-ratio").to_numpy()).all()


@settings(deadline=None, max_examples=100)
@given(centre=st.floats(-50, 50), error=st.floats(0.5, 20), shift=st.floats(0.3, 0.9))
def test_a_limit_moved_by_more_than_rounding_is_refused(centre, error, shift):
    low, high = centre - 1.96 * error, centre + 1.96 * error
    moved = high - shift * 2 * error  # between a seventh and nearly the whole of the upper half is gone
    table = pd.DataFrame({"estimate": [centre], "ci_low": [low], "ci_high": [moved]}).round(6)
    with pytest.raises(AnalysisError, match="not symmetric"):
        effects.effect_sizes(table, "generic")


def test_a_missing_column_is_named_with_what_would_do(counts):
    table = counts(GOOD_COUNTS).drop(columns="comparator_total")
    with pytest.raises(AnalysisError, match="comparator_total: the column is missing") as caught:
        effects.effect_sizes(table, "odds-ratio")
    assert "log_estimate standard_error" in str(caught.value)


def test_a_ratio_with_a_bare_standard_error_is_refused_since_its_scale_is_not_stated():
    table = pd.DataFrame({"estimate": [0.8], "standard_error": [0.1]})
    with pytest.raises(AnalysisError, match="log_estimate"):
        effects.effect_sizes(table, "hazard-ratio")


def test_an_empty_table_is_refused(counts):
    with pytest.raises(AnalysisError, match="no trial"):
        effects.effect_sizes(counts(GOOD_COUNTS).iloc[:0], "odds-ratio")


def test_an_unknown_measure_is_refused(counts):
    with pytest.raises(AnalysisError, match="measure is unknown"):
        effects.effect_sizes(counts(GOOD_COUNTS), "relative risk")


def test_a_column_that_stands_twice_is_refused(counts):
    table = counts(GOOD_COUNTS)
    twice = pd.concat([table, table[["intervention_events"]]], axis=1)
    with pytest.raises(AnalysisError, match="more than once"):
        effects.effect_sizes(twice, "odds-ratio")


def test_the_trial_column_names_trials_where_the_index_only_counts(counts):
    table = counts(GOOD_COUNTS, (41, 40, 5, 41)).assign(trial=["Alder 2021", "Birch 2022"])
    refused(table, "odds-ratio", "intervention_events", "is above")


def test_a_trial_without_a_name_is_called_by_its_place(counts):
    table = counts((3, 40, 5, 41), (41, 40, 5, 41)).assign(trial=["Alder 2021", None])
    with pytest.raises(AnalysisError, match="trial 1: intervention_events"):
        effects.effect_sizes(table, "odds-ratio")
