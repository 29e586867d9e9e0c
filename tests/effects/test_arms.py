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


def joined(name="cap + mitt", parts=("cap", "mitt"), randomised=81, events=7):
    """The arms of the trial and one that joins some of them."""
    row = {"trial": "Alder", "arm": name, "randomised": randomised, "events": events, "joins": parts}
    return pd.concat([ARMS.assign(joins=None), pd.DataFrame([row])], ignore_index=True)


def test_an_arm_used_alone_and_joined_is_counted_twice_and_refused():
    table = uses(("pain", "Alder", "cap + mitt", 81, 7), ("pain", "Alder", "cap", 40, 3))
    with pytest.raises(AnalysisError, match="used beyond its participants") as caught:
        effects.arm_ledger(table, joined())
    assert "arm cap in synthesis pain" in str(caught.value)


def test_a_joined_arm_is_charged_to_the_arms_in_it():
    table = uses(("pain", "Alder", "cap + mitt", 81, 7), ("pain", "Alder", "usual care", 42, 6))
    ledger = effects.arm_ledger(table, joined()).set_index("arm")
    assert ledger.index.tolist() == ["cap", "mitt", "usual care"]
    assert ledger["used"].tolist() == pytest.approx([40, 41, 42])
    assert ledger["events_used"].tolist() == pytest.approx([3, 4, 6])


def test_half_a_joined_arm_leaves_half_of_each_arm_in_it():
    table = uses(("pain", "Alder", "cap + mitt", 40.5, 3.5), ("pain", "Alder", "cap", 20, 1.5))
    ledger = effects.arm_ledger(table, joined()).set_index("arm")
    assert ledger["unused"].tolist() == pytest.approx([0, 20.5])


@pytest.mark.parametrize(
    ("arms", "words"),
    [
        (joined(parts=("cap", "shawl")), "does not name single arms"),
        (joined(parts=("cap", "cap")), "does not name single arms"),
        (joined(parts=("cap", "cap + mitt")), "does not name single arms"),
        (joined(parts="cap, mitt"), "is no list of arms"),
        (joined(randomised=82), "has more people than its arms"),
    ],
)
def test_a_joined_arm_that_does_not_fit_its_parts_is_refused(arms, words):
    with pytest.raises(AnalysisError, match=f"trial Alder: joins: arm cap \\+ mitt {words}"):
        effects.arm_ledger(uses(("pain", "Alder", "usual care", 42, 6)), arms)


@pytest.mark.parametrize("field", ["synthesis", "trial", "arm"])
def test_a_use_without_a_name_is_refused(field):
    with pytest.raises(AnalysisError, match=f"{field}: is missing"):
        effects.arm_ledger(uses(("pain", "Alder", "cap", 40, 3)).assign(**{field: None}), ARMS)


def test_an_arm_named_by_a_number_where_the_trial_lists_words_is_unknown():
    with pytest.raises(AnalysisError, match="is not an arm of the trial"):
        effects.arm_ledger(uses(("pain", "Alder", 1, 40, 3)), ARMS)


def test_a_ledger_of_no_use_is_empty():
    assert effects.arm_ledger(uses(("pain", "Alder", "cap", 40, 3)).iloc[:0], joined()).empty
