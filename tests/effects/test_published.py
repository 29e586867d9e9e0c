"""Effect sizes against printed values; every source stands in tests/published/effect_cases.json."""

import math

import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from treering import effects

COUNTS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]
MEANS = [f"{arm}_{field}" for arm in ("intervention", "comparator") for field in ("mean", "sd", "total")]


def listed(effect, deviation=None):
    """Estimates and either standard errors or variances under the names of the cases."""
    spread = effect["variance"] if deviation == "v" else effect["variance"] ** 0.5
    found = {f"y[{at}]": value for at, value in enumerate(effect["estimate"])}
    return found | {f"{deviation or 'se'}[{at}]": value for at, value in enumerate(spread)}


def test_agresti_aspirin_table_em01(case_table, agree):
    table = case_table("EM01", COUNTS)
    ratio, odds, difference = (
        effects.effect_sizes(table, measure).iloc[0]
        for measure in ("risk-ratio", "odds-ratio", "risk-difference")
    )
    agree(
        "EM01",
        {
            "rr": math.exp(ratio["estimate"]),
            "or": math.exp(odds["estimate"]),
            "log_or": odds["estimate"],
            "se_log_or": odds["variance"] ** 0.5,
            "rd": difference["estimate"],
            "se_rd": difference["variance"] ** 0.5,
        },
    )


def test_gelman_beta_blockers_table_5_4_em03(case_table, agree):
    agree("EM03", listed(effects.effect_sizes(case_table("EM03", COUNTS), "odds-ratio")))


def test_isis_2_odds_reduction_em05(case_table, agree):
    table = case_table("EM05", COUNTS)
    log_odds, variance = effects.effect_sizes(table, "peto-odds-ratio").iloc[0]
    ratio = math.exp(log_odds)
    agree(
        "EM05",
        {
            "odds_reduction_pct": 100 * (1 - ratio),
            "odds_reduction_sd_pct": 100 * ratio * variance**0.5,
            "risk1_pct": 100 * table.iloc[0, 0] / table.iloc[0, 1],
            "risk2_pct": 100 * table.iloc[0, 2] / table.iloc[0, 3],
        },
    )


def test_rothman_rate_ratio_em08(cases, agree):
    data = cases["EM08"]["data"]
    table = pd.DataFrame(
        {
            "intervention_events": [data["e1"]],
            "intervention_time": [data["T1"]],
            "comparator_events": [data["e2"]],
            "comparator_time": [data["T2"]],
        }
    )
    effect = effects.effect_sizes(table, "rate-ratio").iloc[0]
    agree("EM08", {"ratio": math.exp(effect["estimate"])})
    # Closed form: variance of a log Poisson rate ratio.
    assert effect["variance"] == pytest.approx(1 / 41 + 1 / 15, rel=1e-14)


def test_borenstein_table_14_2_em10(case_table, agree):
    agree(
        "EM10", listed(effects.effect_sizes(case_table("EM10", MEANS), "standardized-mean-difference"), "v")
    )


def test_exact_small_sample_factor_em12(cases):
    for name, value in cases["EM12"]["expected"].items():
        found = effects.small_sample_factor(float(name[2:-1]))
        assert found == pytest.approx(value, rel=0, abs=1e-11)


def test_hedges_ratio_of_means_em13(case_table, agree):
    agree("EM13", listed(effects.effect_sizes(case_table("EM13", MEANS), "ratio-of-means"), "v"))


def test_p_value_behind_a_printed_interval_em15(case_table, agree):
    table = case_table("EM15", ["estimate", "ci_low", "ci_high"])
    effect = effects.effect_sizes(table, "hazard-ratio")
    z = effect["estimate"] / effect["variance"] ** 0.5
    agree("EM15", {f"p[{at}]": 2 * norm.sf(value) for at, value in enumerate(z)})


def test_normand_mean_differences_em24(case_table, agree):
    effect = effects.effect_sizes(case_table("EM24", MEANS), "mean-difference")
    y, weight = effect["estimate"].to_numpy(), 1 / effect["variance"].to_numpy()
    # Inverse-variance pooling and the moment estimator in closed form (DerSimonian and Laird 1986).
    pooled = np.sum(weight * y) / np.sum(weight)
    q = np.sum(weight * (y - pooled) ** 2)
    tau2 = (q - len(y) + 1) / (np.sum(weight) - np.sum(weight**2) / np.sum(weight))
    found = {"fixed.est": pooled, "fixed.se": np.sum(weight) ** -0.5, "het.Q": q, "re.DL.tau2": tau2}
    agree("EM24", found)


def test_treatment_arm_correction_shows_no_effect_where_nothing_happened_cc05(case_table, agree):
    table = case_table("CC05", COUNTS)
    by_arm = np.exp(effects.effect_sizes(table, "odds-ratio", correction="treatment-arm")["estimate"])
    constant = np.exp(effects.effect_sizes(table, "odds-ratio", correction="constant")["estimate"])
    added = effects.corrected_counts(table, "treatment-arm")
    agree(
        "CC05",
        {
            "ta.or[0]": by_arm[0],
            "ta.or[1]": by_arm[1],
            "ta.k1[1]": added["intervention_events"][1],
            "ta.k2[1]": added["comparator_events"][1],
            "const.or[1]": constant[1],
        },
    )
