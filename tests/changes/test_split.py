"""The parts of a movement add up to the whole, in either order of causes."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.changes import compare

CAUSES = ("new trial", "correction", "retraction", "risk-of-bias judgement")
NUMBERS = st.floats(-2, 2, allow_nan=False)
VARIANCES = st.floats(0.05, 4)
TRIALS = st.lists(
    st.tuples(st.sampled_from(CAUSES), NUMBERS, NUMBERS, VARIANCES, VARIANCES), min_size=1, max_size=7
)


def two_versions(kit, drawn):
    """Turn drawn trials into two bodies and the entries between them; one trial never changes."""
    before, after, entries = [kit.row("fixed", 0.3)], [kit.row("fixed", 0.3)], []
    for i, (cause, was, now, old, new) in enumerate(drawn):
        trial = f"t{i}"
        kind = "integrity notice" if cause == "retraction" else "result"
        content = {"trial": trial, "outcome": "failed", "notice": "retraction"}
        entries.append(kit.entry(kind, f"{kind}/{trial}", i, content, cause=cause))
        if cause != "new trial":
            before.append(kit.row(trial, was, old))
        out = {"in_main": False, "left_out": "retracted"} if cause == "retraction" else {}
        same = cause == "retraction"
        after.append(kit.row(trial, was if same else now, old if same else new, **out))
    return kit.body(before), kit.body(after), entries


@given(drawn=TRIALS)
def test_both_orders_of_causes_add_up_to_the_whole_movement(kit, drawn):
    before, after, entries = two_versions(kit, drawn)
    found = compare(
        {"failed": before}, {"failed": after}, entries, ("1", "1"), repool=lambda n, rows: kit.mean(rows)
    )["failed"]
    whole = after["pooled"]["estimate"] - before["pooled"]["estimate"]
    for column in ("movement", "movement_reversed"):
        assert sum(p[column] for p in found["split"]) == pytest.approx(whole, abs=1e-9)
    assert found["uncaused"] == []


@given(drawn=TRIALS)
def test_a_comparison_does_not_depend_on_the_order_of_the_entries(kit, drawn):
    before, after, entries = two_versions(kit, drawn)

    def run(listed):
        return compare({"f": before}, {"f": after}, listed, ("1", "1"), repool=lambda n, rows: kit.mean(rows))

    assert run(entries) == run(entries[::-1])


def test_the_order_effect_is_the_largest_difference_between_both_orders(kit):
    # Closed form with equal variances. Before: a 0, b 1 (mean 1/2). After: a 0, c 2 (mean 1).
    before = kit.body([kit.row("a", 0.0), kit.row("b", 1.0)])
    out = kit.row("b", 1.0, in_main=False, left_out="retracted")
    after = kit.body([kit.row("a", 0.0), out, kit.row("c", 2.0)])
    entries = [
        kit.entry("result", "result/c/f", 1, {"trial": "c", "outcome": "f"}),
        kit.entry("integrity notice", "integrity/b", 2, {"trial": "b", "notice": "retraction"}),
    ]
    found = compare({"f": before}, {"f": after}, entries, ("1", "1"), repool=lambda n, r: kit.mean(r))["f"]
    parts = {p["cause"]: (p["movement"], p["movement_reversed"]) for p in found["split"]}
    # c first: (0 + 1 + 2)/3 = 1, then b leaves: 1. b first: 0, then c comes: 1.
    assert parts["new trial"] == (pytest.approx(1 / 2), pytest.approx(1.0))
    assert parts["retraction"] == (pytest.approx(0.0), pytest.approx(-1 / 2))
    assert found["order_effect"] == pytest.approx(1 / 2)


def test_a_step_without_any_trial_left_hands_its_movement_to_the_next(kit):
    before = kit.body([kit.row("a", 0.0)])
    out = kit.row("a", 0.0, in_main=False, left_out="retracted")
    after = kit.body([out, kit.row("b", 0.6)])
    entries = [
        kit.entry("integrity notice", "integrity/a", 1, {"trial": "a", "notice": "retraction"}),
        kit.entry("result", "result/b/f", 2, {"trial": "b", "outcome": "f"}),
    ]
    found = compare({"f": before}, {"f": after}, entries, ("1", "1"), repool=lambda n, r: kit.mean(r))["f"]
    parts = {p["cause"]: p["movement_reversed"] for p in found["split"]}
    assert parts == {"new trial": pytest.approx(0.6), "retraction": pytest.approx(0.0)}
