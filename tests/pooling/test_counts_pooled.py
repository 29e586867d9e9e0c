"""Mantel-Haenszel and Peto against published values and statsmodels."""

import numpy as np
import pandas as pd
import pytest
from statsmodels.stats.contingency_tables import StratifiedTable

from treering.errors import AnalysisError
from treering.pooling import cochran_mantel_haenszel, pool_mantel_haenszel, pool_peto

COLUMNS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]


def table(rows):
    return pd.DataFrame(rows, columns=COLUMNS)


def natural(effect):
    return np.exp([effect.estimate, effect.ci_low, effect.ci_high])


def test_eight_centres_match_agresti(trials):
    # Agresti, Categorical Data Analysis, ch. 6: 2.13 (1.18 to 3.87), log 0.758 SE 0.303, 6.38;
    # from memory (case MH01)
    found = pool_mantel_haenszel(trials("eight_centres"), "odds-ratio")
    assert natural(found) == pytest.approx([2.13, 1.18, 3.87], abs=6e-3)
    assert (found.estimate, found.standard_error) == pytest.approx((0.758, 0.303), abs=6e-4)
    assert cochran_mantel_haenszel(trials("eight_centres")).statistic == pytest.approx(6.38, abs=6e-3)


def test_first_eight_streptokinase_trials_match_lau_1992(trials):
    # abstract: 2,432 patients, 0.74 (0.59 to 0.92), from memory (MH05)
    rows = trials("streptokinase_1973")
    assert rows["intervention_total"].sum() + rows["comparator_total"].sum() == 2432
    assert natural(pool_mantel_haenszel(rows, "odds-ratio")) == pytest.approx([0.74, 0.59, 0.92], abs=5e-3)


def test_aspirin_trials_match_fleiss_1993(trials):
    # 0.897 (0.841 to 0.957), from memory (MH07)
    found = pool_mantel_haenszel(trials("aspirin"), "odds-ratio")
    assert natural(found) == pytest.approx([0.897, 0.841, 0.957], abs=6e-4)


def test_one_table_gives_its_crude_effects():
    # Physicians' Health Study counts, identity (MH08)
    one = table([[189, 11034, 104, 11037]])
    assert np.exp(pool_mantel_haenszel(one, "odds-ratio").estimate) == pytest.approx(
        189 * 10933 / (104 * 10845)
    )
    assert np.exp(pool_mantel_haenszel(one, "risk-ratio").estimate) == pytest.approx(
        189 / 11034 / (104 / 11037)
    )
    assert pool_mantel_haenszel(one, "risk-difference").estimate == pytest.approx(189 / 11034 - 104 / 11037)


def test_half_added_to_zero_cells_reproduces_diamond_2007(trials):
    # Diamond, Bax, Kaul 2007: 1.17 (0.77 to 1.77), double-zero trials kept, from memory (CC04)
    found = pool_mantel_haenszel(trials("rosiglitazone_deaths"), "odds-ratio", correction="constant")
    assert natural(found) == pytest.approx([1.17, 0.77, 1.77], abs=6e-3)
    assert found.k == 42


def test_peto_odds_ratio_matches_nissen_2007(trials):
    # 1.64 (0.98 to 2.74), P 0.06, stored abstracts (CC02)
    found = pool_peto(trials("rosiglitazone_deaths"))
    assert natural(found) == pytest.approx([1.64, 0.98, 2.74], abs=6e-3)
    assert found.p == pytest.approx(0.06, abs=6e-3)
    assert (found.k, found.weights.size) == (23, 42)
    assert any("19 of 42" in remark for remark in found.remarks)


@pytest.mark.parametrize("seed", range(20))
def test_odds_and_risk_ratio_match_statsmodels_on_random_tables(seed):
    rng = np.random.default_rng(seed)
    n1, n2 = rng.integers(5, 60, (2, 9))
    a, c = rng.binomial(n1, 0.2), rng.binomial(n2, 0.3)
    peer = StratifiedTable(np.array([[a, n1 - a], [c, n2 - c]], dtype=float))
    rows = table(np.column_stack([a, n1, c, n2]))
    found = pool_mantel_haenszel(rows, "odds-ratio")
    assert found.estimate == pytest.approx(peer.logodds_pooled, rel=1e-8)
    assert found.standard_error == pytest.approx(peer.logodds_pooled_se, rel=1e-8)
    assert np.exp(pool_mantel_haenszel(rows, "risk-ratio").estimate) == pytest.approx(
        peer.riskratio_pooled, rel=1e-8
    )
    test = peer.test_null_odds(correction=False)
    ours = cochran_mantel_haenszel(rows)
    assert (ours.statistic, ours.p) == pytest.approx((test.statistic, test.pvalue), rel=1e-8)
    corrected = peer.test_null_odds(correction=True)
    assert cochran_mantel_haenszel(rows, continuity=True).statistic == pytest.approx(
        corrected.statistic, rel=1e-8
    )


@pytest.mark.parametrize("measure", ["risk-ratio", "odds-ratio", "risk-difference"])
def test_swapping_the_arms_mirrors_mantel_haenszel(trials, measure):
    rows = trials("beta_blockers")
    swapped = rows[COLUMNS[2:] + COLUMNS[:2]].set_axis(COLUMNS, axis=1)
    one, other = (pool_mantel_haenszel(t, measure) for t in (rows, swapped))
    assert (other.estimate, other.standard_error) == pytest.approx((-one.estimate, one.standard_error))
    assert other.q == pytest.approx(one.q)


@pytest.mark.parametrize(
    ("measure", "exact"), [("risk-ratio", 0.25), ("odds-ratio", 0.5), ("risk-difference", -0.1)]
)
def test_variances_of_large_strata_agree_with_simulation(measure, exact):
    # spread of the estimate over 400 simulated reviews of five trials against the mean stated variance
    rng = np.random.default_rng(5)
    n1, n2 = np.array([40, 60, 80, 100, 150]), np.array([50, 50, 90, 80, 140])
    base = np.array([0.15, 0.2, 0.25, 0.3, 0.2])
    odds = base / (1 - base) * exact
    other = {"risk-ratio": base * exact, "odds-ratio": odds / (1 + odds), "risk-difference": base + exact}[
        measure
    ]
    draws = []
    for _ in range(400):
        rows = np.column_stack([rng.binomial(n1, other), n1, rng.binomial(n2, base), n2])
        found = pool_mantel_haenszel(table(rows), measure)
        draws.append((found.estimate, found.standard_error**2))
    estimates, variances = np.array(draws).T
    assert estimates.mean() == pytest.approx(
        exact if measure == "risk-difference" else np.log(exact), abs=0.05
    )
    assert estimates.var() == pytest.approx(variances.mean(), rel=0.25)


def test_double_zero_trials_stay_listed_and_change_no_ratio(trials):
    rows = trials("aspirin")
    more = pd.concat([rows, table([[0, 50, 0, 40]])])
    for measure in ("risk-ratio", "odds-ratio"):
        one, other = (pool_mantel_haenszel(t, measure) for t in (rows, more))
        assert (other.estimate, other.standard_error, other.k) == pytest.approx(
            (one.estimate, one.standard_error, 7)
        )
        assert other.weights[-1] == 0.0


@pytest.mark.parametrize("amount", [0.1, 0.25, 0.5])
def test_a_constant_correction_is_what_adding_by_hand_gives_in_another_library(amount):
    rows = [[0, 40, 3, 42], [5, 60, 9, 58], [2, 30, 4, 33]]
    found = pool_mantel_haenszel(table(rows), "odds-ratio", correction="constant", amount=amount)
    cells = np.array([[[a, n - a], [c, m - c]] for a, n, c, m in rows], dtype=float)
    cells[0] += amount
    peer = StratifiedTable(list(cells))
    assert found.estimate == pytest.approx(peer.logodds_pooled, rel=1e-10)
    assert found.standard_error == pytest.approx(peer.logodds_pooled_se, rel=1e-10)


def test_weights_of_the_odds_ratio_sum_to_one(trials):
    assert pool_mantel_haenszel(trials("aspirin"), "odds-ratio").weights.sum() == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ([[5, 4, 1, 10]], "intervention_events"),
        ([[-1, 4, 1, 10]], "intervention_events"),
        ([[0, 0, 1, 10]], "intervention_total"),
        ([[3, 10, 0, 10], [2, 8, 0, 9]], "empty in all trials"),
        ([], "no trial"),
    ],
)
def test_bad_counts_are_refused_with_the_reason(rows, words):
    with pytest.raises(AnalysisError, match=words):
        pool_mantel_haenszel(table(rows), "odds-ratio")


def test_measures_that_are_not_of_counts_are_refused(trials):
    with pytest.raises(AnalysisError, match="two-by-two"):
        pool_mantel_haenszel(trials("aspirin"), "mean-difference")


def test_peto_refuses_tables_without_any_event():
    with pytest.raises(AnalysisError, match="no odds ratio"):
        pool_peto(table([[0, 10, 0, 12]]))


@pytest.mark.parametrize("table", [None, {"intervention_events": [1]}, np.ones((2, 4))])
def test_counts_that_are_no_table_are_refused(table):
    with pytest.raises(AnalysisError, match="must be a DataFrame"):
        pool_peto(table)
