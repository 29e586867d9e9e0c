"""Hard cases of reports: corrections, companions, preprints, imputed and unusable numbers, open differences.

The cases H3, H4, H5, H8, H12, H21 are those of the job this program does; all trials are invented.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from treering.report.report_json import report_dict
from treering.terms import EntryKind
from treering.update.views import version_view


def people_of(found: Any) -> int:
    return sum(row["intervention_total"] + row["comparator_total"] for row in found["trials"])


def bias(trial: str, day: str) -> dict[str, Any]:
    domains = ("randomisation", "deviations", "missing_data", "measurement", "selection")
    return {
        "record": "risk-of-bias judgement",
        "trial": trial,
        "outcome": "failed",
        "domains": dict.fromkeys(domains, "Low"),
        "overall": "Low",
        "assessors": ["AA", "BB"],
        "date": day,
    }


def test_h3_a_correction_has_its_cause_and_the_judgement_before_it_is_flagged(
    base: Any, week: Callable[..., Any]
) -> None:
    base.drop("bias.json", bias("T2", "2026-01-08"))
    assert week(base, "2026-01-12").trial("T2")["flags"] == []
    base.drop("a.json", base.extraction("T2", "AA", (30, 140, 44, 138), correction="erratum to table 2"))
    waits = week(base, "2026-01-19")
    assert waits.version is None, "one corrected reading moves nothing"
    assert "waits for the second extractor" in waits.waiting[0]["why"]
    base.drop("b.json", base.extraction("T2", "BB", (30, 140, 44, 138), correction="erratum to table 2"))
    after = week(base, "2026-01-26")
    assert after.trial("T2")["values"]["comparator_events"] == 44
    assert after.trial("T2")["flags"] == ["risk of bias was judged before these numbers came"]
    assert [part["cause"] for part in after.changes["failed"]["split"]] == ["correction"]
    base.drop("again.json", bias("T2", "2026-02-01"))
    assert week(base, "2026-02-02").trial("T2")["flags"] == []


def test_h4_a_longer_follow_up_takes_the_place_and_the_older_result_stays_in_the_store(
    base: Any, week: Callable[..., Any]
) -> None:
    later = {"report": {"id": "T1-follow-up", "form": "companion"}, "published": "2025-11-01"}
    base.drop_pair("T1", (26, 108, 37, 106), **later)
    after = week(base, "2026-01-12")
    assert after.failed["k"] == 3
    assert after.failed["participants"] == people_of(after.failed) == 108 + 106 + 140 + 138 + 80 + 82
    assert [part["cause"] for part in after.changes["failed"]["split"]] == ["new report of an included trial"]
    with base.store() as store:
        readings = [e for e in store.state().all(EntryKind.RESULT) if e.body["trial"] == "T1"]
        then = store.state(version=1).get("result/T1/failed")
    assert [e.body["report"] for e in readings] == ["T1-main", "T1-follow-up"]
    assert readings[1].replaces == readings[0].seq
    assert then.body["values"]["intervention_total"] == 110


def test_h5_an_article_follows_its_preprint_and_no_preprint_follows_an_article(
    review: Any, week: Callable[..., Any]
) -> None:
    review.drop_pair("T1", (24, 110, 33, 108), report={"id": "T1-preprint", "form": "preprint"})
    review.drop_pair("T2", (30, 140, 41, 138))
    week(review, "2026-01-05")
    article = {"report": {"id": "T1-article", "form": "article"}, "published": "2025-12-01"}
    review.drop_pair("T1", (24, 110, 32, 107), **article)
    after = week(review, "2026-01-12")
    assert (after.trial("T1")["report"], after.failed["k"]) == ("T1-article", 2)
    assert after.trial("T1")["published"] == "2025-12-01"
    late = {"report": {"id": "T1-preprint-2", "form": "preprint"}, "published": "2025-12-20"}
    review.drop_pair("T1", (25, 110, 33, 108), **late)
    back = week(review, "2026-01-19")
    assert (back.version, len(back.returned)) == (None, 2)
    assert "is a preprint, unlike T1-article" in back.returned[0]["faults"][0]


def test_h8_the_imputed_share_is_printed_with_the_result_without_it(
    base: Any, week: Callable[..., Any]
) -> None:
    for person in ("AA", "BB"):
        record = base.extraction("T4", person, (60, 300, 90, 300))
        record["results"][0]["origins"] = {"comparator_events": "imputed"}
        base.drop(f"T4-{person}.json", record)
    after = week(base, "2026-01-12")
    share = after.failed["imputed"]
    assert (share["trials"], share["k"], share["share"]) == (["T4"], 4, 0.25)
    assert share["weight"] == pytest.approx(after.trial("T4")["weight"])
    percent = f"imputed numbers: 1 of 4 trials, with {100 * share['weight']:.0f}% of the weight"
    assert percent in after.failed["warnings"]
    assert after.variant("without imputed numbers")["k"] == 3


def test_h21_a_trial_without_a_usable_result_stays_listed(base: Any, week: Callable[..., Any]) -> None:
    for person in ("AA", "BB"):
        record = base.extraction("Chart", person, (0, 0, 0, 0))
        record["results"] = [{"outcome": "failed", "not_usable": "the report shows a chart without numbers"}]
        base.drop(f"Chart-{person}.json", record)
    after = week(base, "2026-01-12")
    row = after.trial("Chart")
    assert (row["status"], row["in_main"], row["weight"]) == ("no usable result", False, None)
    assert row["left_out"] == "no usable result: the report shows a chart without numbers"
    assert after.failed["k"] == 3
    assert not after.failed["monitoring"]["new_look"]


def test_h21_a_review_with_no_usable_result_at_all_says_so(review: Any, week: Callable[..., Any]) -> None:
    for person in ("AA", "BB"):
        record = review.extraction("Chart", person, (0, 0, 0, 0))
        record["results"] = [{"outcome": "failed", "not_usable": "only a chart"}]
        review.drop(f"Chart-{person}.json", record)
    after = week(review, "2026-01-05")
    assert (after.failed["k"], after.failed["pooled"]) == (0, None)
    assert "no trial with a usable result" in after.failed["warnings"]
    assert after.failed["monitoring"]["look"] is None
    review.drop_pair("T1", (24, 110, 33, 108))
    first = week(review, "2026-01-12")
    assert first.failed["k"] == 1
    assert first.changes["failed"]["uncaused"] == []


def unresolved(trial: str, **fields: Any) -> dict[str, Any]:
    return {
        "record": "adjudication",
        "trial": trial,
        "outcome": "failed",
        "adjudicator": "CC",
        "reason_class": "report conflict",
        "reason": "table 2 and the text differ",
        "unresolved": True,
    } | fields


@pytest.fixture
def open_case(base: Any) -> Any:
    """Return the review with a large trial that would cross and one on whose reading that depends."""
    base.drop_pair("Large", (150, 800, 230, 800))
    base.drop("x-AA.json", base.extraction("Open", "AA", (190, 800, 250, 800)))
    base.drop("x-BB.json", base.extraction("Open", "BB", (290, 800, 250, 800)))
    base.drop("x-CC.json", unresolved("Open"))
    return base


def test_h12_no_crossing_is_declared_while_it_hangs_on_an_unresolved_reading(
    open_case: Any, week: Callable[..., Any]
) -> None:
    after = week(open_case, "2026-01-12")
    assert "Open" not in {row["trial"] for row in after.failed["trials"]}
    block = after.failed["monitoring"]
    assert after.verdict == "cannot be judged at this look"
    assert [(item["reader"], item["verdict"]) for item in block["unsettled"]] == [
        ("AA", "benefit boundary crossed"),
        ("BB", "required information reached without a crossing"),
    ]
    assert "depends on them" in block["look"]["remarks"][0]
    assert (block["look"]["spends"], block["look"]["boundary"]) == (False, None)
    assert block["look"]["alpha_spent"] == block["looks"][0]["alpha_spent"]
    assert (block["rests_on"], after.told) == (None, [])
    tried = [after.variant(f"with Open as {reader} read it") for reader in ("AA", "BB")]
    assert [variant["k"] for variant in tried] == [5, 5]
    assert tried[0]["ci_high"] < 0 < tried[1]["ci_high"]
    with open_case.store() as store:
        (waits,) = report_dict(version_view(store, 2))["waiting"]
    assert (waits["trial"], waits["needs"]) == ("Open", "unresolved")


def test_h12_the_crossing_is_declared_when_the_reading_is_settled(
    open_case: Any, week: Callable[..., Any]
) -> None:
    week(open_case, "2026-01-12")
    settled = {"values": {"intervention_events": 190}, "locator": "table 2", "unresolved": False}
    open_case.drop("settled.json", unresolved("Open", **settled))
    after = week(open_case, "2026-01-19")
    assert after.verdict == "benefit boundary crossed"
    assert {notice["event"] for notice in after.told} == {"boundary crossed"}
    assert after.failed["monitoring"]["unsettled"] == []


def test_h12_the_crossing_is_declared_when_the_reading_turns_out_unusable(
    open_case: Any, week: Callable[..., Any]
) -> None:
    week(open_case, "2026-01-12")
    open_case.drop("bias.json", bias("T1", "2026-01-15"))
    still = week(open_case, "2026-01-19")
    assert (still.verdict, still.failed["monitoring"]["new_look"]) == ("cannot be judged at this look", False)
    settled = {"not_usable": "table and text cannot both be right", "unresolved": False}
    open_case.drop("settled.json", unresolved("Open", **settled))
    after = week(open_case, "2026-01-26")
    assert after.verdict == "benefit boundary crossed"
    assert [look["number"] for look in after.failed["monitoring"]["looks"]] == [1, 2, 3]
    assert {notice["event"] for notice in after.told} == {"boundary crossed"}


def test_h12_a_verdict_that_both_readings_share_is_declared(base: Any, week: Callable[..., Any]) -> None:
    base.drop_pair("Large", (150, 800, 230, 800))
    base.drop("x-AA.json", base.extraction("Open", "AA", (19, 80, 25, 80)))
    base.drop("x-BB.json", base.extraction("Open", "BB", (20, 80, 25, 80)))
    base.drop("x-CC.json", unresolved("Open"))
    after = week(base, "2026-01-12")
    assert after.verdict == "benefit boundary crossed"
    assert any("their difference is unresolved" in warning for warning in after.failed["warnings"])
