import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from treering import effects
from treering.errors import AnalysisError


def test_merging_three_arms_ma02(cases, agree):
    data = cases["MA02"]["data"]
    found = effects.combine_continuous(data["means"], data["sds"], data["ns"])
    agree("MA02", {"n": found["total"], "mean": found["mean"], "sd": found["sd"]})


def test_joined_arms_are_what_their_people_give_together():
    # NumPy on the individual values (seeded).
    people = [np.random.default_rng(seed).normal(seed, 2, 10 + seed) for seed in (1, 5, 9)]
    found = effects.combine_continuous(
        [arm.mean() for arm in people], [arm.std(ddof=1) for arm in people], [len(arm) for arm in people]
    )
    together = np.concatenate(people)
    assert found["mean"] == pytest.approx(together.mean(), rel=1e-12)
    assert found["sd"] == pytest.approx(together.std(ddof=1), rel=1e-12)


def test_joined_binary_arms_add_up():
    found = effects.combine_binary([3, 5, 0], [40, 42, 39], origin="table 3")
    assert (found["events"], found["total"]) == (8, 121)
    assert found.origin == "table 3"


def test_arms_that_cannot_be_right_are_refused():
    with pytest.raises(AnalysisError, match="trial Alder: events"):
        effects.combine_binary([3, 50], [40, 42], trial="Alder")
    with pytest.raises(AnalysisError, match="trial Alder: sd"):
        effects.combine_continuous([1, 2], [1, -1], [20, 20], trial="Alder")
    with pytest.raises(AnalysisError, match="fewer than two arms"):
        effects.combine_binary([3], [40])
    with pytest.raises(AnalysisError, match="differ in length"):
        effects.combine_binary([3, 4], [40])


@pytest.fixture
def contrasts(counts):
    table = counts((3, 40, 6, 42), (4, 41, 6, 42), (9, 80, 12, 81))
    return table.assign(trial=["Alder", "Alder", "Birch"], comparator_arm="usual care")


def test_a_shared_comparator_is_divided_evenly_and_a_lone_one_stays(contrasts):
    found = effects.split_shared_comparator(contrasts)
    assert found["comparator_total"].tolist() == [21, 21, 81]
    assert found["comparator_events"].tolist() == [3, 3, 12]
    assert found["comparator_shared_by"].tolist() == [2, 2, 1]
    assert found["intervention_total"].tolist() == contrasts["intervention_total"].tolist()


def test_means_and_sds_of_a_shared_comparator_stay(means):
    table = means((5, 2, 30, 6, 2.5, 33), (4, 2, 31, 6, 2.5, 33)).assign(
        trial="Alder", comparator_arm="usual care"
    )
    found = effects.split_shared_comparator(table)
    assert found["comparator_total"].tolist() == [16.5, 16.5]
    assert found[["comparator_mean", "comparator_sd"]].drop_duplicates().to_numpy().tolist() == [[6, 2.5]]


@settings(deadline=None)
@given(shared_by=st.integers(1, 7), total=st.integers(1, 999))
def test_the_shares_never_exceed_the_arm(shared_by, total):
    table = pd.DataFrame(
        {"trial": ["Alder"] * shared_by, "comparator_arm": "usual care", "comparator_total": total}
    )
    assert effects.split_shared_comparator(table)["comparator_total"].sum() == pytest.approx(total, rel=1e-12)


def test_rows_that_disagree_about_a_shared_arm_are_refused(contrasts):
    contrasts.loc[1, "comparator_events"] = 7
    with pytest.raises(AnalysisError, match="trial Alder: comparator_events: differs between rows"):
        effects.split_shared_comparator(contrasts)


def test_an_unnamed_comparator_arm_is_refused(contrasts):
    contrasts["comparator_arm"] = ["usual care", "usual care", None]
    with pytest.raises(AnalysisError, match="trial Birch: comparator_arm: is missing"):
        effects.split_shared_comparator(contrasts)


def test_a_shared_figure_below_zero_is_refused_before_it_is_divided():
    table = pd.DataFrame(
        {"trial": ["Alder", "Alder"], "comparator_arm": "usual care", "comparator_total": -40}
    )
    with pytest.raises(AnalysisError, match=r"trial Alder: comparator_total: is below zero. Found: -40"):
        effects.split_shared_comparator(table)


@pytest.mark.parametrize("arms", [3, None, "ab"])
def test_arms_that_are_no_sequence_are_refused(arms):
    with pytest.raises(AnalysisError, match="is no sequence"):
        effects.combine_binary(arms, [10, 12])
