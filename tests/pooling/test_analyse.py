"""The table analysis: what stands in it, where it agrees with its parts, and what it refuses."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from treering.effects import effect_sizes
from treering.errors import AnalysisError
from treering.pooling import (
    HalfNormal,
    absolute_effects,
    pool,
    pool_bayesian,
    pool_mantel_haenszel,
    subgroup_analysis,
)
from treering.pooling.analyse import analyse_table
from treering.pooling.analysis_result import TableAnalysis
from treering.pooling.plain import plain

PUBLISHED = Path(__file__).parents[1] / "published"
COUNTS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]


@pytest.fixture(scope="module")
def table() -> pd.DataFrame:
    """BCG trials (Colditz et al. 1994), with latitude and two subgroups by it."""
    source = json.loads((PUBLISHED / "bcg_latitude.json").read_text())
    frame = pd.DataFrame(source["rows"], columns=source["columns"])
    frame["trial"] = [f"Trial {i + 1}" for i in range(len(frame))]
    frame["latitude"] = source["latitude"]
    frame["subgroup"] = np.where(frame["latitude"] > 40, "north", "south")
    return frame


@pytest.fixture(scope="module")
def analysis(table: pd.DataFrame) -> TableAnalysis:
    return analyse_table(
        table, "risk-ratio", covariates=["latitude"], comparator_risk=[0.02, 0.05], better="lower", mid=0.1
    )


@pytest.fixture(scope="module")
def rosiglitazone() -> pd.DataFrame:
    source = json.loads((PUBLISHED / "rosiglitazone_cardiovascular_death.json").read_text())
    return pd.DataFrame(source["rows"], columns=source["columns"])


def test_nothing_is_missing_when_the_table_has_everything(analysis: TableAnalysis) -> None:
    assert set(analysis.not_done) == {"small_study peters", "small_study harbord"}
    assert all("odds ratios" in reason for reason in analysis.not_done.values())
    assert len(analysis.estimators) == 7
    assert len(analysis.one_stage) == 4


def test_published_pooled_risk_ratio_stands_in_the_analysis(analysis: TableAnalysis) -> None:
    # Colditz et al. 1994, abstract: relative risk 0.49 (0.34 to 0.70), by DerSimonian-Laird (from memory)
    found = analysis.to_dict()["estimators"]["dersimonian-laird"]["natural"]["estimate"]
    assert found == pytest.approx(0.49, abs=0.005)


def test_every_part_is_what_its_own_function_gives(analysis: TableAnalysis, table: pd.DataFrame) -> None:
    sizes = effect_sizes(table, "risk-ratio")
    y, v = sizes["estimate"], sizes["variance"]
    assert analysis.random.estimate == pool(y, v).estimate
    assert analysis.common.estimate == pool(y, v, model="common").estimate
    assert analysis.subgroups.test_p == subgroup_analysis(y, v, table["subgroup"]).test_p
    assert analysis.bayesian.p_beyond_mid == pool_bayesian(y, v, HalfNormal(0.5), mid=0.1).p_beyond_mid
    assert analysis.absolute == absolute_effects(pool(y, v), "risk-ratio", [0.02, 0.05])


def test_the_planned_degrees_of_freedom_hold_wherever_trials_are_pooled_again(table: pd.DataFrame) -> None:
    found = analyse_table(table, "risk-ratio", prediction_df="k-1", one_stage="never")
    last = found.cumulative.steps.iloc[-1]
    assert last["prediction_high"] == pytest.approx(found.random.prediction_high, rel=1e-9)
    without = effect_sizes(table.iloc[1:], "risk-ratio")
    again = pool(without["estimate"], without["variance"], prediction_df="k-1")
    assert found.leave_one_out["prediction_high"].iloc[0] == pytest.approx(again.prediction_high, rel=1e-9)


def test_the_size_of_a_correction_reaches_mantel_haenszel(table: pd.DataFrame) -> None:
    zero = table.assign(intervention_events=[0, *table["intervention_events"][1:]])
    options = {"correction": "constant", "amount": 0.1}
    found = analyse_table(zero, "odds-ratio", one_stage="never", **options)
    assert found.mantel_haenszel.estimate == pool_mantel_haenszel(zero, "odds-ratio", **options).estimate
    assert found.mantel_haenszel.estimate != pool_mantel_haenszel(zero, "odds-ratio").estimate


def test_methods_for_odds_ratios_stand_beside_odds_ratios(
    table: pd.DataFrame, rosiglitazone: pd.DataFrame
) -> None:
    found = analyse_table(table, "odds-ratio", one_stage="never")
    assert found.small_study.harbord.k == found.small_study.peters.k == 13
    assert not found.small_study.forced
    # Nissen and Wolski 2007: Peto odds ratio 1.64 (0.98 to 2.74)
    rare = analyse_table(rosiglitazone, "odds-ratio", one_stage="never").to_dict()["peto"]["natural"]
    assert [rare[name] for name in ("estimate", "ci_low", "ci_high")] == pytest.approx(
        [1.64, 0.98, 2.74], abs=0.006
    )


def test_few_trials_get_small_study_tests_only_when_forced_and_then_marked(table: pd.DataFrame) -> None:
    held = analyse_table(table.head(6), "odds-ratio", one_stage="never")
    assert held.small_study is None
    assert held.trim_and_fill is None
    assert "6 trials" in held.not_done["small_study"]
    forced = analyse_table(table.head(6), "odds-ratio", one_stage="never", force_small_study=True)
    assert forced.small_study.forced
    assert forced.trim_and_fill.few_trials


def test_leaving_a_trial_out_is_pooling_the_others(analysis: TableAnalysis, table: pd.DataFrame) -> None:
    sizes = effect_sizes(table.drop(index=4), "risk-ratio")
    alone = pool(sizes["estimate"], sizes["variance"])
    row = analysis.leave_one_out.loc["Trial 5"]
    assert row["estimate"] == pytest.approx(alone.estimate, abs=1e-9)
    assert row["tau2"] == pytest.approx(alone.tau2, abs=1e-8)


def test_the_last_cumulative_step_is_the_whole(table: pd.DataFrame, analysis: TableAnalysis) -> None:
    dated = analyse_table(table.assign(year=np.arange(2013, 2000, -1)), "risk-ratio", one_stage="never")
    assert dated.cumulative.order == "year"
    assert dated.cumulative.steps.index[0] == "Trial 13"
    assert dated.cumulative.steps["estimate"].iloc[-1] == pytest.approx(analysis.random.estimate, abs=1e-9)
    assert analysis.cumulative.order == "rows of the table"


def test_weights_of_the_trials_sum_to_one(analysis: TableAnalysis) -> None:
    assert sum(trial.weight_random for trial in analysis.trials) == pytest.approx(1)
    assert sum(trial.weight_common for trial in analysis.trials) == pytest.approx(1)


def test_the_dictionary_is_strict_json(analysis: TableAnalysis) -> None:
    text = json.dumps(analysis.to_dict(), allow_nan=False)
    assert json.loads(text)["random"]["k"] == 13


def test_limits_on_the_natural_scale_are_exponentials_for_ratios_only(analysis: TableAnalysis) -> None:
    block = analysis.to_dict()["random"]
    assert block["natural"]["ci_low"] == pytest.approx(np.exp(block["ci_low"]))
    plain_difference = analyse_table(
        pd.DataFrame({"estimate": [1.0, 2.0, 1.4], "standard_error": [0.2, 0.3, 0.2]}), "mean-difference"
    ).to_dict()["random"]
    assert plain_difference["natural"]["ci_low"] == plain_difference["ci_low"]


def test_trials_without_a_usable_effect_are_listed_and_count_in_the_one_stage_models(
    rosiglitazone: pd.DataFrame,
) -> None:
    found = analyse_table(rosiglitazone, "odds-ratio")
    assert len(found.left_out) + len(found.trials) == 42
    assert any("no event in either arm" in row.reason for row in found.left_out)
    assert found.one_stage["beta-binomial"].k_informative == 42
    assert any(word.startswith("Left out of the pooled effect") for word in found.warnings)


def test_a_table_of_double_zero_trials_is_listed_without_any_pooled_effect() -> None:
    rows = pd.DataFrame([[0, 50, 0, 50], [0, 30, 0, 31]], columns=COUNTS)
    found = analyse_table(rows, "risk-ratio", comparator_risk=0.1)
    assert found.random is None
    assert found.trials == ()
    assert len(found.left_out) == 2
    assert "no trial has a usable effect" in found.not_done["random"]
    assert "absolute" in found.not_done
    json.dumps(found.to_dict(), allow_nan=False)


def test_one_trial_is_analysed_as_far_as_one_trial_goes() -> None:
    rows = pd.DataFrame([[5, 50, 9, 50]], columns=COUNTS)
    found = analyse_table(rows, "risk-ratio", one_stage="never")
    assert found.random.k == 1
    assert found.not_done["leave_one_out"] == "one trial only"
    assert found.to_dict()["random"]["tau2"] is None


def test_common_events_need_no_one_stage_model_unless_asked_for() -> None:
    rows = pd.DataFrame([[20, 50, 25, 50], [18, 60, 30, 61]], columns=COUNTS)
    assert "not rare" in analyse_table(rows, "odds-ratio").not_done["one_stage"]
    assert len(analyse_table(rows, "odds-ratio", one_stage="always").one_stage) == 4


def test_differences_in_their_own_unit_need_a_prior_to_be_given() -> None:
    rows = pd.DataFrame({"estimate": [1.0, 2.0], "standard_error": [0.2, 0.3]})
    assert "prior" in analyse_table(rows, "mean-difference").not_done["bayesian"]
    assert analyse_table(rows, "mean-difference", prior=HalfNormal(1.0)).bayesian is not None


def test_an_empirical_prior_on_another_scale_is_warned_about(table: pd.DataFrame) -> None:
    found = analyse_table(table, "risk-ratio", prior="turner-2012-any-outcome", one_stage="never")
    assert any("describes log odds ratios; the analysis is on risk-ratio" in word for word in found.warnings)
    assert any("recalled" in word for word in found.warnings)


def test_a_trial_reported_without_counts_is_named_where_counts_are_needed() -> None:
    rows = pd.DataFrame(
        {
            "trial": ["Ashdown", "Birling"],
            **dict(zip(COUNTS, ([4, None], [40, None], [8, None], [41, None]), strict=True)),
            "estimate": [None, 0.7],
            "ci_low": [None, 0.4],
            "ci_high": [None, 1.225],
        }
    )
    found = analyse_table(rows, "risk-ratio")
    assert found.not_done["one_stage"] == "no counts for Birling"
    assert any("Birling (ratio and interval)" in word for word in found.warnings)


@pytest.mark.parametrize(
    ("rows", "options", "words"),
    [
        ({"trial": ["A", "A"]}, {}, "trial A: The trial stands in more than one row"),
        ({"trial": ["A", None]}, {}, "the name is missing"),
        ({"comparator_total": [0, 50]}, {}, "comparator_total"),
        ({"intervention_events": [99, 1]}, {}, "intervention_events"),
        ({}, {"one_stage": "perhaps"}, "one_stage is not a known word"),
        ({}, {"tau2": "perhaps"}, "tau2 is not a known word"),
        ({}, {"level": 95}, "level"),
    ],
)
def test_unusable_tables_are_refused(rows: dict, options: dict, words: str) -> None:
    good = {"trial": ["A", "B"], **dict(zip(COUNTS, ([3, 4], [50, 50], [6, 7], [50, 50]), strict=True))}
    with pytest.raises(AnalysisError, match=words):
        analyse_table(pd.DataFrame(good | rows), "risk-ratio", **options)


def test_a_faulty_part_is_noted_with_its_reason_and_the_rest_stands(table: pd.DataFrame) -> None:
    found = analyse_table(table, "risk-ratio", order="day", covariates=["altitude"], one_stage="never")
    assert "order by" in found.not_done["cumulative"]
    assert "altitude" in found.not_done["regression"]
    assert found.random.k == 13


def test_values_without_a_plain_form_are_refused() -> None:
    with pytest.raises(TypeError, match="no plain form"):
        plain(object())
