"""Every difference between two versions has a cause, or is listed as having none."""

from __future__ import annotations

import pytest

from treering.changes import compare
from treering.errors import AnalysisError

SAME_CODE = ("1.0", "1.0")


def run(kit, before, after, entries, codes=SAME_CODE, repool=None):
    pooled = repool or (lambda name, rows: kit.mean(rows))
    previous = None if before is None else {"failed": before}
    return compare(previous, {"failed": after}, entries, codes, repool=pooled)["failed"]


def result(kit, trial, seq, **other):
    return kit.entry("result", f"result/{trial}/failed", seq, {"trial": trial, "outcome": "failed"}, **other)


def test_in_the_base_version_every_trial_is_new_and_there_is_nothing_to_move_from(kit):
    after = kit.body([kit.row("alder", 0.1), kit.row("brook", 0.3)])
    found = run(kit, None, after, [result(kit, "alder", 1), result(kit, "brook", 2)], (None, "1.0"))
    assert found["causes"] == ["new trial"]
    assert [t["trial"] for t in found["trials_added"]] == ["alder", "brook"]
    assert (found["movement"], found["split"], found["uncaused"]) == (None, [], [])
    assert "no earlier estimate" in found["split_note"]


def test_a_new_trial_moves_the_estimate_by_the_closed_form(kit):
    before = kit.body([kit.row("alder", 0.0)])
    after = kit.body([kit.row("alder", 0.0), kit.row("brook", 1.0, 0.5)])
    found = run(kit, before, after, [result(kit, "brook", 7)])
    # Closed form: weights 1 and 2, so the mean moves from 0 to 2/3.
    (part,) = found["split"]
    assert part["cause"] == "new trial"
    assert part["entries"] == [7]
    assert part["movement"] == pytest.approx(2 / 3, abs=1e-12)
    assert found["movement"] == pytest.approx(2 / 3, abs=1e-12)


def test_a_second_report_of_an_included_trial_is_not_a_new_trial(kit):
    # The trial stood in another synthesis before.
    other = kit.body([kit.row("brook", 0.2)])
    before = {"pain": other, "failed": kit.body([kit.row("alder", 0.0)])}
    after = {"pain": other, "failed": kit.body([kit.row("alder", 0.0), kit.row("brook", 1.0)])}
    found = compare(before, after, [result(kit, "brook", 3)], SAME_CODE, repool=lambda n, r: kit.mean(r))
    assert found["failed"]["causes"] == ["new report of an included trial"]
    assert found["pain"]["causes"] == []


def test_a_corrected_number_is_told_with_both_values_and_its_reason(kit):
    before = kit.body([kit.row("alder", 0.0, values={"events": 12}), kit.row("brook", 0.4)])
    after = kit.body([kit.row("alder", 0.2, values={"events": 14}), kit.row("brook", 0.4)])
    entry = result(kit, "alder", 9, replaces=2, reason="erratum")
    found = run(kit, before, after, [entry])
    assert found["causes"] == ["correction"]
    told = {(c["field"], c["before"], c["after"], c["reason"]) for c in found["trials_changed"]}
    assert told == {("values.events", 12, 14, "erratum"), ("estimate", 0.0, 0.2, "erratum")}
    assert found["split"][0]["movement"] == pytest.approx(0.1, abs=1e-12)


@pytest.mark.parametrize(
    ("notice", "cause"),
    [
        ("retraction", "retraction"),
        ("expression of concern", "integrity notice"),
        ("erratum", "correction"),
    ],
)
def test_a_trial_that_leaves_by_a_notice_is_listed_as_removed_with_the_cause_of_the_notice(
    kit, notice, cause
):
    before = kit.body([kit.row("alder", 0.0), kit.row("brook", 0.4)])
    out = kit.row("brook", 0.4, in_main=False, left_out="by a notice")
    entry = kit.entry("integrity notice", "integrity/brook/2031/n", 5, {"trial": "brook", "notice": notice})
    found = run(kit, before, kit.body([kit.row("alder", 0.0), out]), [entry])
    (gone,) = found["trials_removed"]
    assert (gone["trial"], gone["left_out"], gone["cause"]) == ("brook", "by a notice", cause)
    assert found["split"][0]["movement"] == pytest.approx(-0.2, abs=1e-12)
    assert found["uncaused"] == []


def test_a_reinstated_trial_comes_back_under_the_integrity_notice(kit):
    out = kit.row("brook", 0.4, in_main=False, left_out="retracted")
    entry = kit.entry(
        "integrity notice", "integrity/brook/2032/n", 8, {"trial": "brook", "notice": "reinstatement"}
    )
    rows = [kit.row("alder", 0.0)]
    found = run(kit, kit.body([*rows, out]), kit.body([*rows, kit.row("brook", 0.4)]), [entry])
    assert found["causes"] == ["integrity notice"]
    assert found["movement"] == pytest.approx(0.2, abs=1e-12)
    assert found["trials_removed"] == []


def test_a_new_judgement_is_a_change_that_moves_nothing(kit):
    before = kit.body([kit.row("alder", 0.1, risk_of_bias="Low")])
    after = kit.body([kit.row("alder", 0.1, risk_of_bias="High")])
    entry = kit.entry(
        "risk-of-bias judgement", "bias/alder/failed", 4, {"trial": "alder", "outcome": "failed"}
    )
    found = run(kit, before, after, [entry])
    assert found["causes"] == ["risk-of-bias judgement"]
    assert [p["movement"] for p in found["split"]] == [0.0]
    assert found["movement"] == 0.0


def test_a_certainty_judgement_is_a_cause_without_a_movement(kit):
    same = kit.body([kit.row("alder", 0.1)])
    entry = kit.entry("certainty judgement", "certainty/failed", 4, {"outcome": "failed"})
    found = run(kit, same, same, [entry])
    assert found["causes"] == ["certainty judgement"]
    assert found["certainty_entries"] == [4]
    assert found["split"] == []


def test_an_amendment_explains_a_movement_on_unchanged_trials(kit):
    rows = [kit.row("alder", 0.0), kit.row("brook", 0.4)]
    amendment = kit.entry("amendment", "amendment/2031/1", 6, {"reason": "another model"})
    found = run(kit, kit.body(rows, 0.30), kit.body(rows), [amendment])
    assert [(p["cause"], p["movement"]) for p in found["split"]] == [
        ("protocol amendment", pytest.approx(-0.1, abs=1e-12))
    ]
    assert found["uncaused"] == []


def test_another_code_version_explains_a_movement_on_unchanged_trials(kit):
    rows = [kit.row("alder", 0.0), kit.row("brook", 0.4)]
    found = run(kit, kit.body(rows, 0.30), kit.body(rows), [], ("1.0", "1.1"))
    assert found["causes"] == ["software change"]
    assert found["split"][0]["movement"] == pytest.approx(-0.1, abs=1e-12)


def test_a_plan_field_changes_only_by_an_amendment(kit):
    rows = [kit.row("alder", 0.0)]
    before, after = kit.body(rows), kit.body(rows, mid=-0.3)
    silent = run(kit, before, after, [])
    assert silent["uncaused"] == [{"what": "mid", "detail": "plan field"}]
    said = run(kit, before, after, [kit.entry("amendment", "amendment/2031/1", 6)])
    assert said["uncaused"] == []
    assert said["plan_changed"][0]["cause"] == "protocol amendment"


def test_a_changed_measure_leaves_nothing_to_split(kit):
    before = kit.body([kit.row("alder", 0.0)])
    after = kit.body([kit.row("alder", 0.1)], measure="odds-ratio")
    found = run(kit, before, after, [kit.entry("amendment", "amendment/2031/1", 6)])
    assert (found["movement"], found["split"]) == (None, [])
    assert "not on one scale" in found["split_note"]


def test_a_number_that_no_entry_explains_is_listed_as_uncaused(kit):
    before = kit.body([kit.row("alder", 0.0), kit.row("brook", 0.4)])
    after = kit.body([kit.row("alder", 0.2), kit.row("brook", 0.4)])
    found = run(kit, before, after, [result(kit, "cedar", 3)])
    assert {item["what"] for item in found["uncaused"]} == {"trial alder", "pooled estimate"}
    assert found["split"][-1]["cause"] is None
    assert found["split"][-1]["movement"] == pytest.approx(0.1, abs=1e-12)


def test_a_trial_that_vanishes_without_an_entry_is_listed_as_uncaused(kit):
    before = kit.body([kit.row("alder", 0.0), kit.row("brook", 0.4)])
    found = run(kit, before, kit.body([kit.row("alder", 0.0)]), [])
    assert found["trials_removed"][0]["left_out"] == "no longer among the trials"
    assert "trial brook" in {item["what"] for item in found["uncaused"]}


def test_an_estimate_that_the_plan_does_not_reproduce_is_listed_as_uncaused(kit):
    rows = [kit.row("alder", 0.0), kit.row("brook", 0.4)]
    found = run(kit, kit.body(rows), kit.body([*rows, kit.row("cedar", 0.8)], 0.7), [result(kit, "cedar", 3)])
    parts = {p["cause"]: p["movement"] for p in found["split"]}
    assert parts["new trial"] == pytest.approx(0.2, abs=1e-12)
    assert parts[None] == pytest.approx(0.3, abs=1e-12)
    assert {item["what"] for item in found["uncaused"]} == {"pooled estimate"}


def test_a_verdict_that_changes_with_nothing_else_is_listed_as_uncaused(kit):
    rows = [kit.row("alder", 0.0)]
    before, after = (
        kit.body(rows, monitoring={"look": {"verdict": verdict}})
        for verdict in ("accruing", "benefit boundary crossed")
    )
    found = run(kit, before, after, [])
    assert found["verdict"] == {"before": "accruing", "after": "benefit boundary crossed"}
    assert [item["what"] for item in found["uncaused"]] == ["verdict"]


def test_the_cause_that_a_person_named_wins_over_the_kind_of_the_entry(kit):
    before = kit.body([kit.row("alder", 0.0)])
    after = kit.body([kit.row("alder", 0.2)])
    entry = result(kit, "alder", 3, replaces=1, cause="new report of an included trial")
    assert run(kit, before, after, [entry])["causes"] == ["new report of an included trial"]


def test_a_cause_outside_the_vocabulary_is_refused_with_the_entry(kit):
    entry = result(kit, "alder", 3, cause="because")
    with pytest.raises(AnalysisError, match=r"Entry 3 .*Found: because"):
        run(kit, None, kit.body([kit.row("alder", 0.0)]), [entry])


def test_a_synthesis_that_an_amendment_ends_is_still_told(kit):
    before = {"failed": kit.body([kit.row("alder", 0.0)])}
    entry = kit.entry("amendment", "amendment/2031/1", 6, {"reason": "outcome dropped"})
    found = compare(before, {}, [entry], SAME_CODE, repool=lambda n, r: kit.mean(r))["failed"]
    assert found["causes"] == ["protocol amendment"]
    assert found["estimate"]["after"] is None
    assert found["split_note"] == "The synthesis was ended."


def test_an_amendment_does_not_explain_a_stored_number_that_changed(kit):
    before = kit.body([kit.row("alder", 0.0, values={"events": 12})])
    after = kit.body([kit.row("alder", 0.2, values={"events": 14})])
    found = run(kit, before, after, [kit.entry("amendment", "amendment/2031/1", 6)])
    assert {"what": "trial alder", "detail": "values.events"} in found["uncaused"]


def test_an_amendment_explains_an_effect_computed_anew_from_the_same_numbers(kit):
    before = kit.body([kit.row("alder", 0.0, values={"events": 12})])
    after = kit.body([kit.row("alder", 0.2, values={"events": 12})])
    found = run(kit, before, after, [kit.entry("amendment", "amendment/2031/1", 6)])
    assert (found["causes"], found["uncaused"]) == (["protocol amendment"], [])


def test_an_amendment_explains_the_trials_of_an_outcome_it_adds(kit):
    old = {"failed": kit.body([kit.row("alder", 0.0)])}
    new = {**old, "pain": kit.body([kit.row("alder", 0.4)])}
    found = compare(old, new, [kit.entry("amendment", "a", 6)], SAME_CODE, repool=lambda n, r: kit.mean(r))[
        "pain"
    ]
    assert (found["causes"], found["uncaused"]) == (["protocol amendment"], [])


def test_a_description_written_anew_is_a_correction(kit):
    before, after = (kit.body([kit.row("alder", 0.0, label=name)]) for name in ("alder", "Alder 2029"))
    entry = kit.entry("study", "study/alder", 5, {"trial": "alder"}, replaces=1)
    found = run(kit, before, after, [entry])
    assert (found["causes"], found["uncaused"]) == (["correction"], [])
