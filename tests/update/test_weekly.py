"""One weekly update: what it lays down, gives back, tells, and what it leaves alone."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from treering.errors import AmendmentError, StoreBusyError
from treering.terms import EntryKind

SMALL = (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138)), ("T3", (15, 80, 21, 82)))


def with_trials(review: Any) -> Any:
    for trial, counts in SMALL:
        review.drop_pair(trial, counts)
    return review


def test_two_equal_readings_make_the_first_version(review: Any) -> None:
    summary = with_trials(review).update("2026-01-05")
    assert (summary.version, summary.returned, summary.waiting) == (1, (), ())
    report = review.report(1)
    assert report["syntheses"][0]["k"] == 3
    assert report["previous"] is None


def test_files_end_in_filed(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    left = sorted(p.name for p in review.folder.joinpath("intake").iterdir())
    assert left == ["filed"]
    assert len(list(review.folder.joinpath("intake", "filed").iterdir())) == 6


def test_quiet_week_lays_down_no_version_and_spends_no_alpha(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    summary = review.update("2026-01-12")
    assert summary.version is None
    with review.store() as store:
        assert len(store.versions()) == 1
        assert len(store.state().live(EntryKind.LOOK)) == 1
        outcomes = [run.body["outcome"] for run in store.state().live(EntryKind.RUN)]
        assert outcomes == ["version 1", "nothing new"]
    assert "2026-01-12" in (review.folder / "reports" / "index.html").read_text()


def test_a_search_that_finds_nothing_is_news_for_the_status_line_only(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    review.drop(
        "search.json",
        {
            "record": "search run",
            "source": "register A",
            "date": "2026-01-11",
            "strategy": "warm*",
            "hits": 12,
            "new_hits": 0,
            "by": "DD",
        },
    )
    assert review.update("2026-01-12").version is None
    assert "register A searched to 2026-01-11" in (review.folder / "reports" / "index.html").read_text()


def test_one_reading_waits_for_the_second(review: Any) -> None:
    review.drop("a.json", review.extraction("T1", "AA", (1, 10, 2, 10)))
    summary = review.update("2026-01-05")
    assert summary.version is None
    assert [item["trial"] for item in summary.waiting] == ["T1"]


def test_a_difference_waits_until_a_third_person_settles_it(review: Any) -> None:
    review.drop("a.json", review.extraction("T1", "AA", (24, 110, 33, 108)))
    review.drop("b.json", review.extraction("T1", "BB", (24, 110, 38, 108)))
    assert review.update("2026-01-05").version is None
    review.drop(
        "c.json",
        {
            "record": "adjudication",
            "trial": "T1",
            "outcome": "failed",
            "adjudicator": "CC",
            "values": {"comparator_events": 33},
            "locator": "table 2",
            "reason_class": "slip",
            "reason": "38 stands in the next line",
        },
    )
    assert review.update("2026-01-12").version == 1
    (trial,) = review.report(1)["syntheses"][0]["trials"]
    assert trial["values"]["comparator_events"] == 33
    assert trial["basis"] == "adjudicated"


def test_a_correction_by_both_readers_is_its_own_cause(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    review.drop_pair("T2", (30, 140, 44, 138), correction="erratum to table 2")
    assert review.update("2026-01-12").version == 2
    report = review.report(2)
    assert report["causes"] == ["correction"]
    assert set(report["syntheses"][0]["changes"]) == {"correction"}


def test_the_parts_of_a_change_add_up_to_the_movement(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    review.drop_pair("T2", (30, 140, 44, 138), correction="erratum")
    review.drop_pair("T4", (60, 300, 90, 300))
    review.update("2026-01-12")
    (synthesis,) = review.report(2)["syntheses"]
    before, after = (review.report(n)["syntheses"][0]["pooled"]["estimate"] for n in (1, 2))
    parts = synthesis["change_detail"]["split"]
    assert {part["cause"] for part in parts} == {"new trial", "correction"}
    assert sum(part["movement"] for part in parts) == pytest.approx(after - before, abs=1e-9)


BAD = {
    "not-json.json": "{",
    "unknown-outcome.json": {"results": [{"outcome": "nonsense", "intervention_events": 1}]},
    "above-total.json": {"counts": (120, 110, 33, 108)},
    "nobody.json": {"extractor": None},
    "own-trial.json": {"trial": "Own"},
    "stranger.json": {"extractor": "ZZ"},
    "no-role.json": {"extractor": "DD"},
    "picture.png": "not a record",
    "empty.csv": "",
}


@pytest.mark.parametrize("name", sorted(BAD))
def test_a_bad_file_goes_back_with_a_sentence_and_the_rest_is_processed(review: Any, name: str) -> None:
    content = BAD[name]
    if isinstance(content, dict):
        fields = dict(content)
        counts = fields.pop("counts", (1, 10, 2, 10))
        record = review.extraction(fields.pop("trial", "Bad"), fields.pop("extractor", "AA"), counts) | fields
        content = {key: value for key, value in record.items() if value is not None}
    review.drop(name, content)
    summary = with_trials(review).update("2026-01-05")
    assert summary.version == 1
    (returned,) = summary.returned
    assert returned["file"] == name
    assert all(sentence.startswith(name) for sentence in returned["faults"])
    reason = review.folder / "intake" / "returned" / f"{name}.reason.txt"
    assert reason.read_text().splitlines() == returned["faults"]
    assert (review.folder / "intake" / "returned" / name).exists()


def test_the_same_person_as_both_readers_is_refused(review: Any) -> None:
    review.drop("a.json", review.extraction("T1", "AA", (1, 10, 2, 10)))
    review.drop("b.json", review.extraction("T1", "AA", (1, 10, 3, 10)))
    summary = review.update("2026-01-05")
    assert summary.version is None
    assert summary.returned


def test_a_file_dropped_twice_changes_nothing(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    with review.store() as store:
        before = len(store.state())
    review.drop("again.json", review.extraction("T1", "AA", SMALL[0][1]))
    assert review.update("2026-01-12").version is None
    with review.store() as store:
        assert len(store.state()) == before + 1  # the run itself


def test_a_changed_plan_without_amendment_is_refused(review: Any, tmp_path: Any) -> None:
    with_trials(review).update("2026-01-05")
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan.replace("diversity = 0.25", "diversity = 0.4"))
    with pytest.raises(AmendmentError, match="amendment"):
        review.update("2026-01-12")
    amendment = """
[[amendments]]
date = 2026-01-10
author = "DD"
clauses = ["outcomes.failed.monitoring.diversity"]
reason = "more heterogeneity than expected"
results_seen = true
"""
    review.write_plan(plan.replace("diversity = 0.25", "diversity = 0.4") + amendment)
    assert review.update("2026-01-12").version == 2
    report = review.report(2)
    assert report["causes"] == ["protocol amendment"]
    looks = report["syntheses"][0]["monitoring"]["looks"]
    assert len({look["plan_digest"] for look in looks}) == 2


def test_an_altered_amendment_is_refused(review: Any) -> None:
    amendment = """
[[amendments]]
date = 2026-01-01
author = "DD"
clauses = ["x"]
reason = "y"
results_seen = false
"""
    plan = (review.folder / "config" / "review.toml").read_text() + amendment
    review.write_plan(plan)
    with_trials(review).update("2026-01-05")
    review.write_plan(plan.replace('reason = "y"', 'reason = "z"'))
    with pytest.raises(AmendmentError, match="altered"):
        review.update("2026-01-12")


def test_two_updates_at_once_never_interleave(review: Any) -> None:
    with_trials(review).update("2026-01-05")
    with review.store() as store, store.exclusive(), pytest.raises(StoreBusyError):
        review.update("2026-01-12")
    assert review.update("2026-01-12").version is None


def test_crossing_and_lost_crossing_reach_the_same_people(make_review: Callable[..., Any]) -> None:
    review = with_trials(make_review())
    review.update("2026-01-05")
    review.drop_pair("Large", (150, 800, 230, 800))
    crossed = review.update("2026-01-12")
    assert crossed.verdicts["failed"] == "benefit boundary crossed"
    review.drop(
        "gone.json",
        {
            "record": "integrity notice",
            "trial": "Large",
            "notice": "retraction",
            "date": "2026-01-17",
            "reason": "retracted by the journal",
            "seen_by": "DD",
        },
    )
    lost = review.update("2026-01-19")
    assert lost.verdicts["failed"] == "crossing no longer supported"
    assert sorted(item["person"] for item in crossed.told) == ["chair", "second"]
    assert sorted(item["person"] for item in lost.told) == ["chair", "second"]
    report = review.report(3)["syntheses"][0]
    (row,) = [trial for trial in report["trials"] if trial["trial"] == "Large"]
    assert not row["in_main"]
    assert "retracted" in row["left_out"]
    assert "with retracted and held trials" in {item["name"] for item in report["sensitivity"]}


def test_each_notice_is_delivered_to_each_person_once(review: Any) -> None:
    with_trials(review)
    review.drop_pair("Large", (150, 800, 230, 800))
    review.update("2026-01-05")
    outbox = review.folder / "reports" / "outbox"
    first = {path.name: path.read_bytes() for path in outbox.iterdir()}
    assert review.update("2026-01-12").told == ()
    assert {path.name: path.read_bytes() for path in outbox.iterdir()} == first
