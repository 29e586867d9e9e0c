"""Hard cases of the ledger through real files: late trials, amendments, lost crossings, quiet weeks.

The cases H13 to H18, H22 and H24 are those of the job this program does; all trials are invented.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from treering.terms import EntryKind
from treering.update.rhythm import rhythm

LOST = "crossing no longer supported"
AMENDMENT = """
[[amendments]]
date = {day}
author = "DD"
clauses = ["{clause}"]
reason = "{reason}"
results_seen = true
"""


def amend(review: Any, old: str, new: str, *, day: str, clause: str = "outcomes.failed") -> None:
    """Change the plan by a dated amendment."""
    plan = (review.folder / "config" / "review.toml").read_text()
    assert old in plan
    words = AMENDMENT.format(day=day, clause=clause, reason="a rule that was too loose")
    review.write_plan(plan.replace(old, new) + words)


def test_h13_a_late_trial_enters_at_the_look_when_it_was_verified_and_the_curve_is_redrawn_beside_it(
    base: Any, week: Callable[..., Any]
) -> None:
    before = week(base, "2026-01-12")
    assert before.version is None
    base.drop_pair("Old", (50, 260, 70, 258), published="1998-06")
    after = week(base, "2026-01-19").failed["monitoring"]
    first, second = after["looks"]
    assert (first["trials"], first["date"]) == (["T1", "T2", "T3"], "2026-01-05")
    assert (second["trials"], second["date"]) == (["Old", "T1", "T2", "T3"], "2026-01-19")
    assert [(point["date"], point["trial"]) for point in after["hindsight"]] == [
        ("1998-06-30", "Old"),
        ("2025-01-01", "T1, T2, T3"),
    ]
    assert after["hindsight"][0]["fraction"] < first["fraction"]


def test_h14_an_amendment_shows_what_it_moved_on_the_same_trials_and_carries_alpha_over(
    base: Any, week: Callable[..., Any]
) -> None:
    amend(
        base,
        "[outcomes.monitoring]",
        '[outcomes.pooling]\nmodel = "common"\ninterval = "wald"\n[outcomes.monitoring]',
        day="2026-01-10",
        clause="outcomes.failed.pooling",
    )
    after = week(base, "2026-01-12")
    change = after.changes["failed"]
    assert (change["causes"], change["trials_added"]) == (["protocol amendment"], [])
    assert {item["field"] for item in change["plan_changed"]} == {
        "method",
        "monitoring model",
        "monitoring interval",
    }
    assert sum(part["movement"] for part in change["split"]) == pytest.approx(change["movement"], abs=1e-12)
    first, second = after.failed["monitoring"]["looks"]
    assert first["plan_digest"] != second["plan_digest"]
    assert (second["spends"], second["alpha_spent"]) == (False, first["alpha_spent"])
    assert any("2026-01-10: the earlier ledger is closed" in remark for remark in second["remarks"])
    assert any("No new verified data" in remark for remark in second["remarks"])


def test_h14_the_amendment_is_printed_with_its_date_author_and_what_was_seen(base: Any) -> None:
    amend(base, "diversity = 0.25", "diversity = 0.4", day="2026-01-10")
    base.update("2026-01-12")
    (amendment,) = base.report(2)["amendments"]
    assert (amendment["date"], amendment["author"], amendment["results_seen"]) == ("2026-01-10", "DD", True)
    assert amendment["reason"] == "a rule that was too loose"


def undo_by_removal(review: Any) -> None:
    review.drop(
        "gone.json",
        {
            "record": "integrity notice",
            "trial": "Large",
            "notice": "retraction",
            "date": "2026-01-17",
            "reason": "retracted",
            "seen_by": "DD",
        },
    )


def undo_by_correction(review: Any) -> None:
    review.drop_pair("Large", (218, 800, 230, 800), correction="events of the arms were typed twice")


def undo_by_late_null_trial(review: Any) -> None:
    review.drop_pair("Null", (500, 2000, 500, 2000), published="2009")


def undo_by_heterogeneity(review: Any) -> None:
    review.drop_pair("Apart", (3, 300, 90, 300))  # in favour, and far from the others


def undo_by_amendment(review: Any) -> None:
    amend(review, "effect = 0.75", "alpha = 0.0001\neffect = 0.75", day="2026-01-17")


@pytest.mark.parametrize(
    ("undo", "cause"),
    [
        (undo_by_removal, "retraction"),
        (undo_by_correction, "correction"),
        (undo_by_late_null_trial, "new trial"),
        (undo_by_heterogeneity, "new trial"),
        (undo_by_amendment, "protocol amendment"),
    ],
)
def test_h15_a_crossing_is_undone_by_each_cause_and_the_same_people_are_told(
    crossed: Any, week: Callable[..., Any], undo: Callable[[Any], None], cause: str
) -> None:
    with crossed.store() as store:
        first = [e.body for e in store.state().live(EntryKind.NOTICE)]
    undo(crossed)
    after = week(crossed, "2026-01-19")
    assert after.verdict == LOST
    assert {(n["person"], n["event"]) for n in after.told} == {(n["person"], LOST) for n in first}
    assert cause in after.told[0]["text"]
    with crossed.store() as store:
        kept = [e.body for e in store.state().live(EntryKind.NOTICE) if e.body["version"] == 2]
    assert kept == first, "the first alert stays in history"


def test_h15_heterogeneity_undoes_it_although_the_estimate_points_further_away(
    crossed: Any, week: Callable[..., Any]
) -> None:
    undo_by_heterogeneity(crossed)
    after = week(crossed, "2026-01-19").failed
    first, second = after["monitoring"]["looks"][1:]
    assert second["estimate"] < first["estimate"] < 0
    assert abs(second["z"]) < abs(first["z"])
    assert after["pooled"]["tau2"] > 0.1


def test_h16_alpha_is_never_refunded_by_retraction_amendment_or_return(
    crossed: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    undo_by_removal(crossed)
    week(crossed, "2026-01-19")
    amend(crossed, "diversity = 0.25", "diversity = 0.5", day="2026-01-24")
    week(crossed, "2026-01-26")
    crossed.drop("back.json", notice("Large", "reinstatement", "2026-01-31"))
    looks = week(crossed, "2026-02-02").failed["monitoring"]["looks"]
    spent = [look["alpha_spent"] for look in looks]
    assert spent == sorted(spent)
    assert spent[1] > 0
    assert len(looks) == 5
    assert all(value <= 0.05 for value in spent)


def test_h17_less_information_than_once_used_cannot_be_judged(
    base: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    base.drop("gone.json", notice("T2", "retraction", "2026-01-10"))
    after = week(base, "2026-01-12")
    first, second = after.failed["monitoring"]["looks"]
    assert second["fraction"] < first["fraction"]
    assert (after.verdict, second["spends"]) == ("cannot be judged at this look", False)
    assert second["fraction_reestimated"] is not None


def ongoing(trial: str, planned: int, end: str) -> dict[str, Any]:
    return {
        "record": "ongoing trial",
        "trial": trial,
        "planned": planned,
        "expected_end": end,
        "status": "recruiting",
        "by": "DD",
        "date": "2026-01-08",
    }


def test_h18_ongoing_trials_say_when_we_will_know_and_which_are_overdue(
    base: Any, week: Callable[..., Any]
) -> None:
    base.drop("late.json", ongoing("Late", 400, "2024-06-30"))
    base.drop("soon.json", ongoing("Soon", 2500, "2026-06-30"))
    base.drop_pair("T4", (20, 90, 26, 91))
    block = week(base, "2026-01-12").failed["monitoring"]
    late, soon = block["outlook"]["steps"]
    # the protocol's lag of reports is 365 days (its default)
    assert (late["trials"], late["overdue"], late["date"]) == (["Late"], ["Late"], "2026-01-12")
    assert (soon["trials"], soon["overdue"], soon["date"]) == (["Soon"], [], "2027-06-30")
    assert block["look"]["fraction"] < late["fraction"] < 1 < soon["fraction"]
    assert block["outlook"]["reaches"] == "2027-06-30"
    assert soon["benefit"]["no effect"] < soon["benefit"]["effect to detect"]
    assert block["outlook"]["next_trial"] is not None


def test_h18_a_trial_that_reported_is_awaited_no_more(base: Any, week: Callable[..., Any]) -> None:
    base.drop("soon.json", ongoing("Soon", 900, "2025-12-31"))
    base.drop_pair("Soon", (120, 450, 140, 450))
    assert week(base, "2026-01-12").failed["monitoring"]["outlook"] is None


def test_h22_a_quiet_week_leaves_a_run_and_nothing_else(base: Any, week: Callable[..., Any]) -> None:
    with base.store() as store:
        before = len(store.state())
    assert week(base, "2026-01-12").version is None
    with base.store() as store:
        assert len(store.state()) == before


def test_h22_a_judgement_makes_a_version_and_no_look(base: Any, week: Callable[..., Any]) -> None:
    domains = ("randomisation", "deviations", "missing_data", "measurement", "selection")
    judgement = {
        "record": "risk-of-bias judgement",
        "trial": "T1",
        "outcome": "failed",
        "domains": dict.fromkeys(domains, "High"),
        "overall": "High",
        "assessors": ["AA", "BB"],
        "date": "2026-01-08",
    }
    base.drop("bias.json", judgement)
    after = week(base, "2026-01-12")
    assert after.version == 2
    assert not after.failed["monitoring"]["new_look"]
    assert len(after.failed["monitoring"]["looks"]) == 1


def test_h24_a_missed_run_shows_on_the_status_line(review: Any) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    review.update("2026-01-05")
    index = review.folder / "reports" / "index.html"
    assert "the next run is due on 2026-01-12" in index.read_text()
    with review.store() as store:
        on_time, missed = (rhythm(store.state(), day, 7) for day in ("2026-01-12", "2026-01-13"))
    assert (on_time["overdue"], missed["overdue"], missed["days_since_run"]) == (False, True, 8)
    review.update("2026-01-26")
    page = index.read_text()
    assert "the run before was 21 days earlier: a run was missed or came late" in page
    assert "the next run is due on 2026-02-02" in page
    with review.store() as store:
        dates = [entry.true_at for entry in store.state().live(EntryKind.RUN)]
    assert dates == ["2026-01-05", "2026-01-26"], "the run that catches up bears its own date"
