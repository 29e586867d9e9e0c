"""Hard cases of notices: retraction and reinstatement, expression of concern, stale certainty, defects.

The cases H1, H2, H20, H23 are those of the job this program does; all trials are invented.
"""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

import pytest

from treering.errors import StoreError
from treering.terms import EntryKind
from treering.update import RunContext, read_review, run_update
from treering.update.defects import declare_defect


def test_h1_a_retracted_trial_leaves_and_stays_visible_with_before_and_after(
    crossed: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    crossed.drop("gone.json", notice("Large", "retraction", "2026-01-17"))
    after = week(crossed, "2026-01-19")
    row = after.trial("Large")
    assert (row["in_main"], row["status"]) == (False, "retracted")
    assert row["left_out"] == "report retracted on 2026-01-17"
    assert after.failed["k"] == 3
    change = after.changes["failed"]
    assert [part["cause"] for part in change["split"]] == ["retraction"]
    assert change["movement"] == pytest.approx(
        after.failed["pooled"]["estimate"] - change["estimate"]["before"]["estimate"]
    )
    with_it = after.variant("with retracted and held trials")
    assert with_it["estimate"] == pytest.approx(change["estimate"]["before"]["estimate"], rel=1e-9)
    assert with_it["k"] == 4


def test_h1_whoever_was_told_of_the_crossing_is_told_whatever_they_follow_now(
    crossed: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    panel = crossed.folder / "config" / "panel.toml"
    panel.write_text('format = 1\n[[members]]\nid = "chair"\nname = "Chair"\nfollows = ["nothing"]\n')
    crossed.drop("gone.json", notice("Large", "retraction", "2026-01-17"))
    told = week(crossed, "2026-01-19").told
    assert [(n["person"], n["event"]) for n in told] == [
        ("chair", "crossing no longer supported"),
        ("second", "crossing no longer supported"),
    ]


def test_h1_a_reinstated_trial_comes_back_and_the_lost_crossing_does_not(
    crossed: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    crossed.drop("gone.json", notice("Large", "retraction", "2026-01-17"))
    week(crossed, "2026-01-19")
    crossed.drop("back.json", notice("Large", "reinstatement", "2026-01-24"))
    after = week(crossed, "2026-01-26")
    row = after.trial("Large")
    assert (row["in_main"], row["flags"]) == (True, ["retraction, 2026-01-17", "reinstatement, 2026-01-24"])
    assert after.verdict == "crossing no longer supported"
    assert "not brought back" in after.failed["monitoring"]["look"]["remarks"][0]
    assert {n["event"] for n in after.told} == {"integrity notice"}
    assert "reinstatement, 2026-01-24" in after.told[0]["text"]


def test_h2_keep_and_flag_leaves_the_trial_in_and_prints_the_result_without_it(
    crossed: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    crossed.drop("doubt.json", notice("Large", "expression of concern", "2026-01-17"))
    after = week(crossed, "2026-01-19")
    row = after.trial("Large")
    assert (row["in_main"], row["flags"]) == (True, ["expression of concern, 2026-01-17"])
    assert after.failed["k"] == 4
    assert after.variant("without trials under an expression of concern")["k"] == 3
    assert not after.failed["monitoring"]["new_look"]
    assert {n["event"] for n in after.told} == {"integrity notice"}


def test_h2_hold_leaves_it_out_prints_the_result_with_it_and_counts_the_days(
    review: Any, week: Callable[..., Any], notice: Callable[..., Any]
) -> None:
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan + '\n[verification]\nconcern = "hold"\n')
    for trial, counts in (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138)), ("T3", (15, 80, 21, 82))):
        review.drop_pair(trial, counts)
    before = week(review, "2026-01-05")
    review.drop("doubt.json", notice("T2", "expression of concern", "2026-01-10"))
    held = week(review, "2026-01-12")
    assert (held.trial("T2")["status"], held.failed["k"]) == ("on hold", 2)
    both = held.variant("with retracted and held trials")
    assert both["estimate"] == pytest.approx(before.failed["pooled"]["estimate"], rel=1e-9)
    assert any("T2 has been on hold for 2 days" in warning for warning in held.failed["warnings"])


@pytest.fixture
def rated(base: Any) -> Any:
    """Return the small review with a certainty rating made on its first version."""
    base.drop(
        "rated.json",
        {
            "record": "certainty judgement",
            "outcome": "failed",
            "rating": "Low",
            "reasons": {"imprecision": "few events"},
            "raters": ["CC", "DD"],
            "version": 1,
            "date": "2026-01-06",
        },
    )
    return base


def test_h20_a_crossing_says_that_the_rating_is_older_than_the_numbers(
    rated: Any, week: Callable[..., Any]
) -> None:
    week(rated, "2026-01-12")
    rated.drop_pair("Large", (150, 800, 230, 800))
    told = rated.update("2026-01-19").told
    assert {item["event"] for item in told} == {"boundary crossed"}
    text = next((rated.folder / "reports" / "outbox").glob("*chair*")).read_text()
    assert "Rated Low on version 1; this is version 3, so the rating was made on older numbers." in " ".join(
        text.split()
    )
    (rating,) = rated.report(3)["certainty"]
    assert rating["stale"]
    assert "it was made on 3 trials; there are 4 now" in rating["stale_reasons"]


def context(review: Any, day: str, code: str) -> RunContext:
    moment = datetime.fromisoformat(f"{day}T12:00:00").replace(tzinfo=UTC)
    return RunContext(read_review(review.folder), moment, code)


def test_h23_a_defect_is_told_computed_again_and_made_good_while_old_files_stay(
    review: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    import treering.update.versions as versions

    review.drop_pair("T1", (24, 110, 33, 108))
    review.drop_pair("T2", (30, 140, 41, 138))
    right = versions.analyse
    with monkeypatch.context() as broken:  # a program that counts everyone twice
        broken.setattr(
            versions,
            "analyse",
            lambda *a, **k: (b := right(*a, **k)) | {"participants": 2 * b["participants"]},
        )
        review.update("2026-01-05")
    published = {p: p.read_bytes() for p in review.folder.glob("reports/*-v001/*") if p.is_file()}
    assert review.report(1)["syntheses"][0]["participants"] == 2 * 496

    found = declare_defect(
        context(review, "2026-01-08", "fixed"),
        defect="counts-twice",
        description="Participants were counted twice.",
        code_versions=["test"],
        by="DD",
    )
    assert (found.versions, found.outcomes, found.undelivered) == ((1,), ("failed",), ())
    assert found.again["failed"].endswith("in version 1 1 figure differs.")
    with review.store() as store:
        (entry,) = store.state().live(EntryKind.DEFECT)
        notices = [e.body for e in store.state().live(EntryKind.NOTICE)]
    assert entry.body["versions"] == [1]
    assert {(n["person"], n["event"]) for n in notices} == {
        ("chair", "defect notice"),
        ("second", "defect notice"),
    }
    assert "touched this outcome in version 1: Participants were counted twice." in " ".join(
        notices[0]["text"].split()
    )

    assert run_update(context(review, "2026-01-12", "fixed")).version == 2
    report = review.report(2)
    assert (report["causes"], report["defects"][0]["id"]) == (["software change"], "counts-twice")
    assert report["syntheses"][0]["participants"] == 496
    assert not report["syntheses"][0]["monitoring"]["new_look"]
    assert {p: p.read_bytes() for p in published} == published


def test_h23_a_defect_names_code_that_made_a_version(base: Any) -> None:
    with pytest.raises(StoreError, match="no version"):
        declare_defect(
            context(base, "2026-01-08", "fixed"), defect="d1", description="x", code_versions=["0.0"], by="DD"
        )
