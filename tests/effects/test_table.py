import mpmath
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from statsmodels.stats.meta_analysis import effectsize_2proportions, effectsize_smd

from treering import effects
from treering.terms import Measure

COUNTS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]
MEANS = [f"{arm}_{field}" for arm in ("intervention", "comparator") for field in ("mean", "sd", "total")]
COUNT_MEASURES = ["risk-ratio", "odds-ratio", "risk-difference", "peto-odds-ratio", "arcsine-difference"]
MEAN_MEASURES = ["mean-difference", "standardized-mean-difference", "ratio-of-means"]


def swapped(table):
    names = {
        name: name.replace("intervention", "X")
        .replace("comparator", "intervention")
        .replace("X", "comparator")
        for name in table.columns
    }
    return table.rename(columns=names)


@st.composite
def arms_with_events(draw, low=1):
    """Counts with at least one event and one non-event in each arm."""
    row = []
    for _ in range(2):
        total = draw(st.integers(3, 5000))
        row += [draw(st.integers(low, total - 1)), total]
    return row


@st.composite
def measured_arms(draw):
    size = st.floats(0.5, 500, allow_nan=False)
    return [
        value
        for _ in range(2)
        for value in (draw(size), draw(st.floats(0.1, 100)), draw(st.integers(3, 4000)))
    ]


count_tables = st.lists(arms_with_events(), min_size=1, max_size=6).map(
    lambda r: pd.DataFrame(r, columns=COUNTS)
)
mean_tables = st.lists(measured_arms(), min_size=1, max_size=6).map(lambda r: pd.DataFrame(r, columns=MEANS))


@pytest.mark.parametrize("measure", COUNT_MEASURES)
@settings(deadline=None, max_examples=40)
@given(table=count_tables)
def test_swapping_the_arms_flips_the_sign_of_a_count_measure(measure, table):
    there, back = effects.effect_sizes(table, measure), effects.effect_sizes(swapped(table), measure)
    np.testing.assert_allclose(back["estimate"], -there["estimate"], rtol=1e-9, atol=1e-12)
    np.testing.assert_allclose(back["variance"], there["variance"], rtol=1e-9)


@pytest.mark.parametrize("measure", MEAN_MEASURES)
@settings(deadline=None, max_examples=40)
@given(table=mean_tables)
def test_swapping_the_arms_flips_the_sign_of_a_mean_measure(measure, table):
    there, back = effects.effect_sizes(table, measure), effects.effect_sizes(swapped(table), measure)
    np.testing.assert_allclose(back["estimate"], -there["estimate"], rtol=1e-9, atol=1e-12)
    np.testing.assert_allclose(back["variance"], there["variance"], rtol=1e-9)


@settings(deadline=None, max_examples=40)
@given(table=mean_tables, unit=st.floats(0.01, 100))
def test_a_change_of_unit_leaves_standardized_measures_and_scales_mean_differences(table, unit):
    scaled = table.copy()
    for name in table.columns[[0, 1, 3, 4]]:
        scaled[name] = table[name] * unit
    for measure in ("standardized-mean-difference", "ratio-of-means"):
        there, here = effects.effect_sizes(table, measure), effects.effect_sizes(scaled, measure)
        np.testing.assert_allclose(here, there, rtol=1e-8, atol=1e-11)
    there, here = (
        effects.effect_sizes(table, "mean-difference"),
        effects.effect_sizes(scaled, "mean-difference"),
    )
    np.testing.assert_allclose(here["estimate"], unit * there["estimate"], rtol=1e-9, atol=1e-11)
    np.testing.assert_allclose(here["variance"], unit**2 * there["variance"], rtol=1e-9)


@settings(deadline=None, max_examples=40)
@given(table=count_tables)
def test_the_odds_ratio_of_the_event_is_the_inverse_of_that_of_its_absence(table):
    other = table.copy()
    for arm in ("intervention", "comparator"):
        other[f"{arm}_events"] = table[f"{arm}_total"] - table[f"{arm}_events"]
    for measure in ("odds-ratio", "peto-odds-ratio", "risk-difference", "arcsine-difference"):
        there, here = effects.effect_sizes(table, measure), effects.effect_sizes(other, measure)
        np.testing.assert_allclose(here["estimate"], -there["estimate"], rtol=1e-7, atol=1e-9)
        np.testing.assert_allclose(here["variance"], there["variance"], rtol=1e-7)


@settings(deadline=None, max_examples=40)
@given(table=count_tables)
def test_ratios_and_differences_agree_with_statsmodels(table):
    # statsmodels 0.14, effectsize_2proportions: a general-purpose library.
    names = {
        "risk-ratio": "risk-ratio",
        "odds-ratio": "odds-ratio",
        "risk-difference": "diff",
        "arcsine-difference": "arcsin",
    }
    for measure, statistic in names.items():
        expected = effectsize_2proportions(
            *(table[name].to_numpy(float) for name in COUNTS), statistic=statistic
        )
        found = effects.effect_sizes(table, measure)
        np.testing.assert_allclose(found["estimate"], expected[0], rtol=1e-9, atol=1e-12)
        np.testing.assert_allclose(found["variance"], expected[1], rtol=1e-8)


@settings(deadline=None, max_examples=30)
@given(table=mean_tables)
def test_standardized_mean_differences_agree_with_statsmodels_up_to_its_approximate_factor(table):
    # statsmodels 0.14 takes the approximation 1 - 3/(4m - 1); Hedges 1981 bounds its error.
    found = effects.effect_sizes(table, "standardized-mean-difference")
    expected, _ = effectsize_smd(*(table[name].to_numpy(float) for name in MEANS))
    m = table["intervention_total"] + table["comparator_total"] - 2
    exact = effects.small_sample_factor(m.to_numpy(float))
    np.testing.assert_allclose(
        found["estimate"], expected * exact / (1 - 3 / (4 * m - 1)), rtol=1e-9, atol=1e-12
    )


@pytest.mark.parametrize("m", [2, 2.5, 3, 7, 50, 199.5, 200, 201, 1000, 123456, 1e9])
def test_the_small_sample_factor_is_exact_on_both_sides_of_its_switch(m):
    # Hedges 1981, equation 6e, in 40-digit arithmetic.
    with mpmath.workdps(40):
        half = mpmath.mpf(m) / 2
        expected = mpmath.exp(
            mpmath.loggamma(half) - mpmath.loggamma(half - mpmath.mpf("0.5"))
        ) / mpmath.sqrt(half)
    assert float(effects.small_sample_factor(m)) == pytest.approx(float(expected), rel=2e-13, abs=0)


def test_the_peto_estimate_is_observed_minus_expected_over_the_hypergeometric_variance(counts):
    # scipy.stats.hypergeom: mean and variance of the events of one arm given both margins.
    from scipy.stats import hypergeom

    events, total, other_events, other_total = 7, 60, 15, 55
    arm = hypergeom(total + other_total, events + other_events, total)
    found = effects.effect_sizes(counts((events, total, other_events, other_total)), "peto-odds-ratio").iloc[
        0
    ]
    assert found["estimate"] == pytest.approx((events - arm.mean()) / arm.var(), rel=1e-12)
    assert found["variance"] == pytest.approx(1 / arm.var(), rel=1e-12)


def test_the_index_of_the_table_is_kept(counts):
    table = counts((3, 40, 5, 41), (9, 80, 4, 77), index=pd.Index(["Alder 2021", "Birch 2022"], name="trial"))
    found = effects.effect_sizes(table, "risk-ratio")
    assert list(found.columns) == ["estimate", "variance"]
    pd.testing.assert_index_equal(found.index, table.index)


def test_a_generic_effect_is_on_its_own_scale(intervals):
    found = effects.effect_sizes(intervals((-1.5, -3.46, 0.46)), "generic").iloc[0]
    # 1.959964 is the 97.5% normal quantile (any table of the normal distribution).
    assert found["estimate"] == -1.5
    assert found["variance"] ** 0.5 == pytest.approx(1.96 / 1.959963984540054, rel=1e-12)
    table = pd.DataFrame({"estimate": [0.2], "standard_error": [0.1]})
    assert effects.effect_sizes(table, "generic").iloc[0].tolist() == pytest.approx([0.2, 0.01])


def test_an_interval_of_another_level_is_read_with_its_own_quantile(intervals):
    table = intervals((2.0, 1.0, 4.0)).assign(ci_level=0.9)
    found = effects.effect_sizes(table, "hazard-ratio").iloc[0]
    # log 2 divided by the 95% normal quantile 1.644854.
    assert found["variance"] ** 0.5 == pytest.approx(np.log(2) / 1.6448536269514722, rel=1e-12)


def test_a_trial_that_reports_only_a_ratio_joins_trials_with_counts(counts):
    table = counts((3, 40, 5, 41), (np.nan, 80, np.nan, 77), index=["Alder", "Birch"])
    table[["estimate", "ci_low", "ci_high"]] = [[np.nan] * 3, [0.8, 0.4, 1.6]]
    found = effects.effect_sizes(table, "odds-ratio")
    assert found.loc["Birch", "estimate"] == pytest.approx(np.log(0.8))
    assert found.attrs["reported"] == (("Birch", "ratio and interval"),)
    alone = effects.effect_sizes(table.loc[["Alder"]], "odds-ratio")
    assert found.loc["Alder"].tolist() == alone.loc["Alder"].tolist()


def test_every_measure_has_a_route(counts):
    from treering.effects.table import ROUTES

    assert set(ROUTES) == set(Measure)


@settings(deadline=None, max_examples=25)
@given(table=count_tables, data=st.data())
def test_the_order_of_trials_does_not_matter(table, data):
    order = data.draw(st.permutations(range(len(table))))
    whole = effects.effect_sizes(table, "odds-ratio")
    pd.testing.assert_frame_equal(effects.effect_sizes(table.iloc[order], "odds-ratio"), whole.iloc[order])


def test_an_index_of_two_levels_is_kept_and_names_the_trial(counts):
    index = pd.MultiIndex.from_tuples([("pain", "Alder"), ("pain", "Birch")], names=["synthesis", "trial"])
    table = counts((3, 40, 5, 41), (0, 80, 0, 77), index=index)
    found = effects.effect_sizes(table, "odds-ratio")
    pd.testing.assert_index_equal(found.index, index)
    assert [left.trial for left in found.attrs["left_out"]] == [("pain", "Birch")]


def test_petos_odds_ratio_takes_observed_minus_expected_where_the_report_gives_it(counts):
    table = counts((7, 60, 15, 55), (np.nan, np.nan, np.nan, np.nan), index=["Alder", "Birch"])
    table["observed_minus_expected"], table["variance_oe"] = [np.nan, -6.0], [np.nan, 12.0]
    assert effects.effect_sizes(table, "peto-odds-ratio").loc["Birch"].tolist() == pytest.approx(
        [-0.5, 1 / 12]
    )
