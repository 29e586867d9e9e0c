import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from treering import effects
from treering.errors import AnalysisError

ARMS = pd.DataFrame(
    {"trial": "Alder", "arm": ["cap", "mitt", "usual care"], "randomised": [40, 41, 42], "events": [3, 4, 6]}
)


def uses(*rows):
    return pd.DataFrame(rows, columns=["synthesis", "trial", "arm", "participants", "events"])


def test_a_split_comparator_is_used_up_exactly():
    table = uses(
        ("pain", "Alder", "cap", 40, 3),
        ("pain", "Alder", "usual care", 21, 3),
        ("pain", "Alder", "mitt", 41, 4),
        ("pain", "Alder", "usual care", 21, 3),
    )
    ledger = effects.arm_ledger(table, ARMS).set_index("arm")
    assert ledger["unused"].tolist() == [0, 0, 0]
    assert ledger.loc["usual care", "contrasts"] == 2
    assert ledger.loc["usual care", "events_used"] == 6


def test_a_comparator_counted_twice_is_refused_by_trial_arm_and_synthesis():
    table = uses(("pain", "Alder", "usual care", 42, 6), ("pain", "Alder", "usual care", 42, 6))
    with pytest.raises(
        AnalysisError, match="trial Alder: arm, participants: the arm is used beyond"
    ) as caught:
        effects.arm_ledger(table, ARMS)
    assert "arm usual care in synthesis pain" in str(caught.value)


def test_the_same_arm_may_serve_two_syntheses():
    table = uses(("pain", "Alder", "usual care", 42, 6), ("burns", "Alder", "usual care", 42, 6))
    assert effects.arm_ledger(table, ARMS)["used"].tolist() == [42, 42]


def test_events_counted_twice_are_refused_even_if_people_are_not():
    table = uses(("pain", "Alder", "usual care", 21, 6), ("pain", "Alder", "usual care", 21, 6))
    with pytest.raises(AnalysisError, match="arm, events: the arm is used beyond its events"):
        effects.arm_ledger(table, ARMS)


@pytest.mark.parametrize(
    ("row", "words"),
    [
        (("pain", "Alder", "glove", 10, 1), "is not an arm of the trial"),
        (("pain", "Alder", "cap", -10, 1), "is below zero"),
        (("pain", "Alder", "cap", None, 1), "is missing"),
    ],
)
def test_a_use_that_cannot_be_right_is_refused(row, words):
    with pytest.raises(AnalysisError, match=words):
        effects.arm_ledger(uses(row), ARMS)


def test_an_arm_listed_twice_is_refused():
    with pytest.raises(AnalysisError, match="arm: is listed twice"):
        effects.arm_ledger(uses(("pain", "Alder", "cap", 10, 1)), pd.concat([ARMS, ARMS.iloc[:1]]))


def test_a_missing_column_is_named():
    with pytest.raises(AnalysisError, match="participants: the column is missing"):
        effects.arm_ledger(uses().drop(columns="participants"), ARMS)


def test_outcomes_without_events_need_only_people():
    table = uses(("pain", "Alder", "cap", 40, None)).drop(columns="events")
    ledger = effects.arm_ledger(table, ARMS.drop(columns="events"))
    assert list(ledger.columns) == ["synthesis", "trial", "arm", "contrasts", "used", "randomised", "unused"]


def test_split_contrasts_pass_the_ledger_and_unsplit_ones_do_not(counts):
    contrasts = counts((3, 40, 6, 42), (4, 41, 6, 42)).assign(
        trial="Alder", intervention_arm=["cap", "mitt"], comparator_arm="usual care"
    )
    split = effects.arm_uses(effects.split_shared_comparator(contrasts), "failed first attempt")
    assert len(split) == 4
    assert effects.arm_ledger(split, ARMS)["unused"].tolist() == [0, 0, 0]
    with pytest.raises(
        AnalysisError, match=r"Found: 84\.0 \(arm usual care in synthesis failed first attempt\)"
    ):
        effects.arm_ledger(effects.arm_uses(contrasts, "failed first attempt"), ARMS)


def test_continuous_contrasts_are_listed_without_events(means):
    contrasts = means((5, 2, 30, 6, 2, 33)).assign(
        trial="Alder", intervention_arm="cap", comparator_arm="mitt"
    )
    uses = effects.arm_uses(contrasts, "pain")
    assert uses.to_numpy().tolist() == [["pain", "Alder", "cap", 30.0], ["pain", "Alder", "mitt", 33.0]]
    with pytest.raises(AnalysisError, match="intervention_arm: the column is missing"):
        effects.arm_uses(contrasts.drop(columns="intervention_arm"), "pain")


@settings(deadline=None, max_examples=25)
@given(parts=st.integers(1, 9), total=st.integers(1, 500))
def test_equal_shares_of_an_arm_always_pass_and_one_share_more_never_does(parts, total):
    arms = pd.DataFrame({"trial": ["Birch"], "arm": ["usual care"], "randomised": [total]})
    share = ("pain", "Birch", "usual care", total / parts, None)
    assert effects.arm_ledger(uses(*[share] * parts).drop(columns="events"), arms)["contrasts"].tolist() == [
        parts
    ]
    with pytest.raises(AnalysisError, match="beyond"):
        effects.arm_ledger(uses(*[share] * (parts + 1)).drop(columns="events"), arms)
