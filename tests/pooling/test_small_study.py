"""Small-study regressions, rank correlation, trim and fill against published values and statsmodels."""

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from treering.errors import AnalysisError
from treering.pooling import egger, harbord, peters, pool, rank_correlation, trim_and_fill


def test_egger_intercept_of_passive_smoking_matches_borenstein_2009(effects_of):
    # ch. 30: 0.89, two-sided P 0.02, from memory (shaky); variances rebuilt from rounded limits (case BS02)
    found = egger(*effects_of("passive_smoking", "ratio-interval"))
    assert found.intercept == pytest.approx(0.89, abs=0.03)
    assert found.p == pytest.approx(0.02, abs=0.005)
    assert (found.df, found.few_trials) == (35, False)


def test_egger_is_the_line_of_ordinary_least_squares(effects_of):
    y, v = effects_of("passive_smoking", "ratio-interval")
    line = sm.OLS(y / np.sqrt(v), sm.add_constant(1 / np.sqrt(v))).fit()
    found = egger(y, v)
    assert (found.intercept, found.slope) == pytest.approx(tuple(line.params), rel=1e-10)
    assert (found.standard_error, found.t, found.p) == pytest.approx(
        (line.bse[0], line.tvalues[0], line.pvalues[0]), rel=1e-10
    )


def test_peters_slope_of_beta_blocker_trials_matches_weighted_least_squares(trials):
    # formula of Peters 2006, values by statsmodels WLS (case BS03)
    found = peters(trials("beta_blockers"))
    assert (found.slope, found.standard_error) == pytest.approx(
        (9.447607757241387, 39.69713595774439), abs=1e-6
    )
    assert found.p == pytest.approx(0.8143084190947176, abs=1e-8)
    assert (found.tested, found.df) == ("slope", 20)


def test_harbord_intercept_of_aspirin_trials_matches_least_squares(trials):
    # formula of Harbord 2006, values by statsmodels OLS (case BS06); seven trials, so marked
    found = harbord(trials("aspirin"))
    assert (found.intercept, found.standard_error, found.p) == pytest.approx(
        (-0.7258783271517637, 0.7877581962018436, 0.39909602876756206), abs=1e-8
    )
    assert found.few_trials


def test_trials_with_zero_cells_are_left_out_and_counted(trials):
    rows = trials("magnesium")
    assert peters(rows).left_out == 1
    assert harbord(rows).left_out == 0
    deaths = trials("rosiglitazone_deaths")
    assert harbord(deaths).left_out == 19
    assert harbord(deaths).k == 23


def test_rank_correlation_is_kendalls_tau_of_standardized_effects(effects_of):
    # definition of Begg and Mazumdar 1994, counted pair by pair
    y, v = effects_of("bcg", "risk-ratio")
    w = 1 / v
    standard = (y - (w * y).sum() / w.sum()) / np.sqrt(v - 1 / w.sum())
    pairs = [np.sign((standard[i] - standard[j]) * (v[i] - v[j])) for i in range(13) for j in range(i)]
    found = rank_correlation(y, v)
    assert found.tau == pytest.approx(sum(pairs) / len(pairs), rel=1e-12)
    assert found.p == pytest.approx(stats.kendalltau(standard, v).pvalue)


def test_trim_and_fill_of_passive_smoking_matches_borenstein_2009(effects_of):
    # ch. 30: 7 imputed, 1.169 (1.089 to 1.254), from memory (case TF01)
    y, v = effects_of("passive_smoking", "ratio-interval")
    for side in (None, "left"):
        found = trim_and_fill(y, v, side=side)
        assert (found.added, found.side) == (7, "left")
        pooled = found.pooled
        assert np.exp([pooled.estimate, pooled.ci_low, pooled.ci_high]) == pytest.approx(
            [1.169, 1.089, 1.254], abs=1.5e-3
        )


@pytest.mark.parametrize("model", ["common", "random"])
def test_mirrored_trials_give_the_mirrored_answer(effects_of, model):
    # Duval and Tweedie 2000, invariance (case TF03)
    y, v = effects_of("magnesium", "odds-ratio", correction="constant")
    one, other = trim_and_fill(y, v, model=model), trim_and_fill(-y, v, model=model)
    assert one.added == other.added > 0
    assert {one.side, other.side} == {"left", "right"}
    assert other.pooled.estimate == pytest.approx(-one.pooled.estimate, abs=1e-10)


@pytest.mark.parametrize("side", [None, "left", "right"])
def test_a_symmetric_funnel_needs_no_filling(effects_of, side):
    y, v = effects_of("magnesium", "odds-ratio", correction="constant")
    centre = pool(y, v, model="common").estimate
    both = np.concatenate([y, 2 * centre - y])
    found = trim_and_fill(both, np.tile(v, 2), side=side)
    assert found.added == 0
    assert found.pooled.estimate == pytest.approx(centre, abs=1e-10)


@pytest.mark.parametrize("function", [egger, rank_correlation, trim_and_fill])
def test_fewer_than_three_trials_are_refused(function):
    with pytest.raises(AnalysisError, match="three"):
        function([0.1, 0.2], [0.1, 0.2])


def test_equally_precise_trials_have_no_line():
    with pytest.raises(AnalysisError, match="same precision"):
        egger([0.1, 0.2, 0.4], [0.1, 0.1, 0.1])


def test_an_unknown_side_is_refused():
    with pytest.raises(AnalysisError, match="side"):
        trim_and_fill([0.1, 0.2, 0.4], [0.1, 0.2, 0.3], side="top")


@pytest.mark.parametrize("estimates", [[0.1] * 4, 0.3 * np.sqrt([0.01, 0.02, 0.03, 0.05]) + 0.1])
def test_trials_exactly_on_a_line_have_no_test_even_after_rounding(estimates):
    with pytest.raises(AnalysisError, match="exactly on one line"):
        egger(estimates, [0.01, 0.02, 0.03, 0.05])
