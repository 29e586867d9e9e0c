import numpy as np
import pandas as pd
import pytest

from treering import effects
from treering.errors import AnalysisError

RATIOS = ["risk-ratio", "odds-ratio"]
TRIALS = ["none happened", "one arm", "ordinary", "all happened"]


@pytest.fixture
def table(counts):
    return counts((0, 50, 0, 60), (0, 50, 3, 60), (4, 50, 3, 60), (50, 50, 60, 60), index=TRIALS)


@pytest.mark.parametrize("measure", RATIOS)
def test_without_correction_undefined_ratios_stay_listed_with_a_reason(table, measure):
    found = effects.effect_sizes(table, measure)
    assert list(found.index) == TRIALS
    assert list(found.index[found["estimate"].isna()]) == ["none happened", "one arm", "all happened"]
    reasons = {left.trial: left.reason for left in found.attrs["left_out"]}
    assert "no event in either arm" in reasons["none happened"]
    assert "no correction" in reasons["one arm"]
    assert "every participant" in reasons["all happened"]
    assert len(reasons) == 3


@pytest.mark.parametrize("measure", RATIOS)
def test_nothing_infinite_leaves(table, measure):
    for correction in ("none", "constant", "treatment-arm"):
        found = effects.effect_sizes(table, measure, correction=correction)
        assert not np.isinf(found.to_numpy()).any()


@pytest.mark.parametrize("correction", ["constant", "treatment-arm"])
@pytest.mark.parametrize("measure", RATIOS)
def test_with_a_correction_every_trial_has_an_effect(table, measure, correction):
    found = effects.effect_sizes(table, measure, correction=correction)
    assert np.isfinite(found.to_numpy()).all()
    assert found.attrs["left_out"] == ()
    assert found.attrs["corrected"] == ("none happened", "one arm", "all happened")


def test_a_correction_leaves_trials_without_a_zero_cell_alone(table):
    plain = effects.effect_sizes(table, "odds-ratio").loc["ordinary"]
    corrected = effects.effect_sizes(table, "odds-ratio", correction="constant").loc["ordinary"]
    assert corrected.tolist() == plain.tolist()


def test_the_constant_correction_adds_to_all_four_cells(table):
    found = effects.effect_sizes(table, "odds-ratio", correction="constant", amount=0.25).loc["one arm"]
    # Woolf 1955 on the table 0.25, 50.25, 3.25, 57.25 by hand.
    assert found["estimate"] == pytest.approx(np.log(0.25 * 57.25 / (50.25 * 3.25)), rel=1e-12)
    assert found["variance"] == pytest.approx(1 / 0.25 + 1 / 50.25 + 1 / 3.25 + 1 / 57.25, rel=1e-12)


def test_the_treatment_arm_corrections_add_up_to_twice_the_amount(counts):
    # Sweeting, Sutton and Lambert 2004: 1/(R + 1) and R/(R + 1) with R = 100/300.
    added = effects.corrected_counts(counts((0, 300, 2, 100)), "treatment-arm").iloc[0]
    assert added["intervention_events"] == pytest.approx(0.75)
    assert added["comparator_events"] == pytest.approx(2.25)
    assert added["intervention_total"] == pytest.approx(301.5)
    assert added["comparator_total"] == pytest.approx(100.5)


def test_double_zero_trials_are_marked_in_the_corrected_counts(table):
    marked = effects.corrected_counts(table)
    assert marked["double_zero"].tolist() == [True, False, False, False]
    assert marked["zero_cell"].tolist() == [True, True, False, True]


@pytest.mark.parametrize("correction", ["none", "constant"])
def test_a_risk_difference_is_never_corrected(table, correction):
    found = effects.effect_sizes(table, "risk-difference", correction=correction)
    assert found.loc["one arm"].tolist() == pytest.approx([-0.05, 0.05 * 0.95 / 60])
    assert found.loc["none happened"].tolist() == [0.0, 0.0]
    assert [left.trial for left in found.attrs["left_out"]] == ["none happened", "all happened"]


def test_petos_odds_ratio_takes_one_zero_cell_uncorrected(table):
    found = effects.effect_sizes(table, "peto-odds-ratio", correction="constant")
    # O - E = 0 - 50*3/110; V = 50*60*3*107/(110^2*109): Yusuf et al. 1985, by hand.
    variance = 50 * 60 * 3 * 107 / (110**2 * 109)
    assert found.loc["one arm", "estimate"] == pytest.approx(-150 / 110 / variance, rel=1e-12)
    assert found.attrs["corrected"] == ()
    assert [left.trial for left in found.attrs["left_out"]] == ["none happened", "all happened"]


def test_the_arcsine_difference_is_defined_for_every_table(table):
    found = effects.effect_sizes(table, "arcsine-difference")
    assert found.loc["none happened"].tolist() == pytest.approx([0.0, 1 / 200 + 1 / 240])
    assert found.attrs["left_out"] == ()


def test_rates_without_events_follow_the_same_rule():
    table = pd.DataFrame(
        {
            "intervention_events": [0, 0],
            "intervention_time": [300.0, 300.0],
            "comparator_events": [0, 4],
            "comparator_time": [100.0, 100.0],
        }
    )
    assert [left.trial for left in effects.effect_sizes(table, "rate-ratio").attrs["left_out"]] == [0, 1]
    by_arm = effects.effect_sizes(table, "rate-ratio", correction="treatment-arm")
    assert by_arm["estimate"][0] == pytest.approx(0, abs=1e-12)
    constant = effects.effect_sizes(table, "rate-ratio", correction="constant")
    assert constant["estimate"][1] == pytest.approx(np.log((0.5 / 300) / (4.5 / 100)))


def test_usable_keeps_what_can_be_pooled_and_names_the_rest(table):
    kept = effects.usable(table, "risk-ratio")
    assert list(kept.index) == ["ordinary"]
    assert len(kept.attrs["left_out"]) == 3
    assert list(effects.usable(table, "risk-difference").index) == ["one arm", "ordinary"]


def test_an_unknown_correction_is_refused(table):
    with pytest.raises(AnalysisError, match="correction is unknown"):
        effects.effect_sizes(table, "risk-ratio", correction="half")
    with pytest.raises(AnalysisError, match="amount"):
        effects.effect_sizes(table, "risk-ratio", correction="constant", amount=0)
