"""Who may do what, what hangs on what, and what deserves a second look."""

from __future__ import annotations

import json

import pytest

from treering.terms import Cause, EntryKind

FFA = "failed-first-attempt"
COUNTS = {
    "intervention_events": 24,
    "intervention_total": 120,
    "comparator_events": 36,
    "comparator_total": 119,
}


def record(kind: str, **fields) -> str:
    return json.dumps({"record": kind, **fields})


def notice(**changes) -> str:
    fields = {
        "trial": "HW-01",
        "notice": "retraction",
        "date": "2026-01-02",
        "reason": "see the link",
        "seen_by": "IN",
    }
    return record("integrity notice", **{**fields, **changes})


def rob(**changes) -> str:
    domains = dict.fromkeys(
        ("randomisation", "deviations", "missing_data", "measurement", "selection"), "Low"
    )
    fields = {
        "trial": "HW-01",
        "outcome": FFA,
        "domains": domains,
        "overall": "Low",
        "assessors": ["MV", "OK"],
        "date": "2026-01-04",
    }
    return record("risk-of-bias judgement", **{**fields, **changes})


# --- people ---


def test_one_person_cannot_be_both_extractors(review, reading) -> None:
    faults = review.faults({"a.toml": reading("MV"), "b.toml": reading("MV", note="again")})
    assert len(faults) == 2
    assert all("the second reading must come from another person" in fault for fault in faults)


def test_one_person_cannot_be_both_extractors_in_one_table(review) -> None:
    row = "HW-01,2025,HW-01-a,MV,pain,3.1,2.0,60,4.0,2.1,61\n"
    head = (
        "trial,published,report,extractor,outcome,intervention_mean,intervention_sd,intervention_total,"
        "comparator_mean,comparator_sd,comparator_total\n"
    )
    faults = review.faults({"a.csv": head + row + row})
    assert [fault.split(", column")[0] for fault in faults] == ["a.csv, row 2", "a.csv, row 3"]


def test_people_of_a_trial_do_not_extract_it(review, reading) -> None:
    review.people(MV={"own_trials": ("HW-01",)})
    assert "took part in trial HW-01" in review.faults({"a.toml": reading("MV")})[0]
    assert review.faults({"a.toml": reading("OK")}) == []


def test_an_adjudicator_has_not_read_the_trial(review, reading, adjudication) -> None:
    review.people(OK={"roles": ("extractor", "adjudicator")})
    files = {
        "a.toml": reading("MV"),
        "b.toml": reading("OK", note="x"),
        "c.toml": adjudication(adjudicator="OK"),
    }
    faults = review.faults(files)
    assert any("c.toml" in fault and "nobody holds two of these roles" in fault for fault in faults)


def test_an_adjudicator_does_not_read_the_trial_later(review, reading, adjudication) -> None:
    review.people(TR={"roles": ("extractor", "adjudicator")})
    other = {
        "intervention_events": 42,
        "intervention_total": 120,
        "comparator_events": 36,
        "comparator_total": 119,
    }
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK", values=other), "c.toml": adjudication()})
    (fault,) = review.faults({"d.toml": reading("TR", "skin-burns")})
    assert "TR adjudicates trial HW-01" in fault


def test_a_third_reading_is_another_persons(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    (fault,) = review.faults({"c.toml": reading("MV", third_reading=True)})
    assert "a third reading is another person's" in fault


def test_three_readers_are_one_too_many(review, reading) -> None:
    review.people(SL={"roles": ("extractor",)})
    files = {f"{who}.toml": reading(who) for who in ("MV", "OK", "SL")}
    assert len(review.faults(files)) == 3


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        (notice(seen_by="MV"), "MV is not an integrity contact"),
        (record("waiver", trial="HW-01", outcome=FFA, person="OK", reason="r"), "OK is not a review lead"),
        (rob(assessors=["MV", "TR"]), "TR is not a risk-of-bias assessor"),
        (rob(assessors=["MV"]), "assessors: the list is too short"),
        (rob(assessors=["MV", "MV"]), "one person can't count twice"),
        (record("search run", source="A", date="2026-01-04", strategy="s", hits=1, new_hits=0, by="MV"),
         "MV is not an information specialist"),
    ],
)  # fmt: skip
def test_roles_are_held_against_the_protocol(review, reading, text, sentence) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    assert any(sentence in fault for fault in review.faults({"x.json": text}))


# --- what changes a verified result ---


def test_a_verified_result_changes_only_with_a_reason(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    (fault,) = review.faults({"c.toml": reading("MV", note="changed")})
    assert "is verified already: say why it changes with correction" in fault
    assert review.faults({"c.toml": reading("MV", note="changed", correction="typing slip")}) == []


def test_an_extractor_changes_an_open_reading_only_with_a_reason(review, reading) -> None:
    review.update({"a.toml": reading("MV")})
    (fault,) = review.faults({"b.toml": reading("MV", note="changed")})
    assert "was read by MV already" in fault


def test_a_correction_of_nothing_is_a_fault(review, reading) -> None:
    (fault,) = review.faults({"a.toml": reading("MV", correction="erratum")})
    assert "there is nothing to correct" in fault


def test_a_reader_corrects_only_their_own_open_reading(review, reading) -> None:
    review.people(SL={"roles": ("extractor",)})
    review.update(
        {"a.toml": reading("MV"), "b.toml": reading("OK", values={**COUNTS, "intervention_events": 42})}
    )
    faults = review.faults({"c.toml": reading("SL", correction="I see it otherwise")})
    assert "SL has not read trial HW-01" in faults[0]
    found = remarks(review, {"c.toml": reading("OK", correction="wrong line")})
    assert "settled by the adjudicator, at the source" in found


def test_an_older_report_or_a_preprint_takes_no_place_unasked(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    older = {"report": "HW-01-0", "published": "2024-01-31"}
    (fault,) = review.faults({"c.toml": reading("MV", **older)})
    assert "appeared before HW-01-a, from which the result comes" in fault
    assert (
        review.faults({"c.toml": reading("MV", **older, correction="the later report has a typing error")})
        == []
    )
    preprint = reading("MV", report="HW-01-p", published="2025-06-01").replace('"article"', '"preprint"')
    (fault,) = review.faults({"c.toml": preprint})
    assert "is a preprint, unlike HW-01-a" in fault


def test_a_reading_dropped_twice_is_only_remarked_on(review, reading) -> None:
    review.update({"a.toml": reading("MV")})
    checked = review.check({"b.toml": "# the same once more\n" + reading("MV")})
    assert checked.faults == ()
    assert any("in the store already" in str(remark) for remark in checked.remarks)
    before = len(review.ledger.live(EntryKind.EXTRACTION))
    review.update({"b.toml": "# the same once more\n" + reading("MV")})
    assert len(review.ledger.live(EntryKind.EXTRACTION)) == before


def test_a_file_taken_in_before_is_a_double(review, reading) -> None:
    review.update({"a.toml": reading("MV")})
    checked = review.check({"copy.toml": reading("MV")})
    assert ([f.name for f in checked.doubles], checked.accepted, checked.returned) == (["copy.toml"], (), ())


def test_a_copy_of_a_faulty_file_goes_back_with_it(review, reading) -> None:
    bad = reading("XX")
    checked = review.check({"a.toml": bad, "b.toml": bad})
    assert [file.name for file in checked.returned] == ["a.toml", "b.toml"]
    assert checked.doubles == ()


# --- what hangs on what ---


def test_an_adjudication_needs_two_readings_that_differ(review, reading, adjudication) -> None:
    (fault,) = review.faults({"a.toml": adjudication()})
    assert "two readings of one report must be in first" in fault
    review.update({"a.toml": reading("MV")})
    both = {"b.toml": reading("OK"), "c.toml": adjudication()}
    assert "the two readings agree already" in review.faults(both)[0]
    review.update({"b.toml": reading("OK")})
    assert "nothing waits there" in review.faults({"c.toml": adjudication()})[0]


def test_an_adjudication_falls_with_the_reading_it_hangs_on(review, reading, adjudication) -> None:
    files = {
        "a.toml": reading("MV"),
        "b.toml": reading("OK", values={"intervention_events": 500}),
        "c.toml": adjudication(),
    }
    checked = review.check(files)
    assert [file.name for file in checked.accepted] == ["a.toml"]
    assert [file.name for file in checked.returned] == ["b.toml", "c.toml"]


def test_a_report_belongs_to_one_trial(review, reading) -> None:
    faults = review.faults({"a.toml": reading("MV"), "b.toml": reading("OK", trial="HW-02")})
    assert any("is said to belong to trial" in fault for fault in faults)


def test_one_register_number_is_one_trial(review, reading) -> None:
    one = reading("MV", registration="INV-1")
    other = reading("OK", trial="HW-02", report="HW-02-a", registration="inv-1")
    faults = review.faults({"a.toml": one, "b.toml": other})
    assert any("one trial counts once" in fault for fault in faults)


def test_ids_that_differ_only_in_capitals_are_refused(review, reading) -> None:
    review.update({"a.toml": reading("MV")})
    (fault,) = review.faults({"b.toml": reading("OK", trial="hw-01", report="x")})
    assert "only in capitals" in fault


def test_a_notice_needs_a_trial_of_the_review(review, reading) -> None:
    assert "the review has no trial HW-01" in review.faults({"n.json": notice()})[0]
    files = {"a.toml": reading("MV"), "n.json": notice()}
    assert review.faults(files) == []
    assert "no report HW-99" in review.faults({**files, "n.json": notice(report="HW-99")})[0]


def test_only_a_retracted_trial_is_reinstated(review, reading) -> None:
    review.update({"a.toml": reading("MV")})
    back = notice(notice="reinstatement", date="2026-01-04")
    assert "was never retracted here" in review.faults({"n.json": back})[0]
    review.update({"n.json": notice()})
    assert review.faults({"m.json": back}) == []


def test_the_overall_risk_of_bias_is_no_better_than_its_worst_domain(review, reading) -> None:
    """RoB 2 (Sterne et al., BMJ 2019;366:l4898): overall at least as severe as the worst domain."""
    domains = dict.fromkeys(
        ("randomisation", "deviations", "missing_data", "measurement", "selection"), "Low"
    )
    worse = {**domains, "measurement": "High"}
    files = {"a.toml": reading("MV"), "r.json": rob(domains=worse)}
    assert "overall is 'Low' though measurement is 'High'" in review.faults(files)[0]
    assert review.faults({**files, "r.json": rob(domains=worse, overall="High")}) == []


def test_a_certainty_rating_names_a_version_that_exists(review) -> None:
    text = record(
        "certainty judgement",
        outcome="pain",
        rating="High",
        raters=["TR", "SL"],
        version=3,
        date="2026-01-04",
    )
    assert "there is no version 3" in review.faults({"c.json": text})[0]


def test_only_live_entries_of_some_kinds_are_withdrawn(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})

    def take(key: str) -> str:
        return record("withdrawal", key=key, reason="wrong trial", by="SL", date="2026-01-05")

    assert "no live entry" in review.faults({"w.json": take("result/HW-77/pain")})[0]
    assert "a study can't be withdrawn" in review.faults({"w.json": take("study/HW-01")})[0]
    settled = review.update({"w.json": take(f"result/HW-01/{FFA}")}, "2026-01-12")
    assert review.result("HW-01", FFA) is None
    assert settled.entries == ()
    assert review.ledger.entries[-1].cause is Cause.CORRECTION


def test_an_acknowledgement_comes_from_the_person_told(review) -> None:
    text = record("acknowledgement", notice="notice/1/pain/x/chair", person="chair", date="2026-01-05")
    assert "there is no notice" in review.faults({"a.json": text})[0]


# --- remarks ---


def remarks(review, files) -> str:
    checked = review.check(files)
    assert checked.faults == ()
    return "\n".join(map(str, checked.remarks))


def pain(**changes) -> dict:
    values = {
        "intervention_mean": 3.1,
        "intervention_sd": 2.0,
        "intervention_total": 100,
        "comparator_mean": 4.0,
        "comparator_sd": 2.1,
        "comparator_total": 100,
    }
    return {**values, **changes}


def test_a_standard_error_in_the_place_of_a_deviation_is_remarked_on(review, reading) -> None:
    assert "standard error" not in remarks(review, {"a.toml": reading("MV", "pain", values=pain())})
    one_arm = reading("MV", "pain", values=pain(intervention_sd=0.2))
    assert "0.2 may be a standard error" in remarks(review, {"a.toml": one_arm})


def test_both_deviations_are_held_against_the_other_trials(review, reading) -> None:
    first = {n: reading(who, "pain", values=pain()) for n, who in (("a.toml", "MV"), ("b.toml", "OK"))}
    review.update(first)
    values = pain(intervention_sd=0.2, comparator_sd=0.21)
    found = remarks(review, {"c.toml": reading("MV", "pain", trial="HW-02", report="HW-02-a", values=values)})
    assert found.count("may be a standard error") == 2


def test_an_interval_that_gives_no_standard_error_is_a_fault(review, reading) -> None:
    values = {"estimate": -1.0, "ci_low": -3.0, "ci_high": -0.5}
    (fault,) = review.faults({"a.toml": reading("MV", "pain", values=values)})
    assert "the interval is not symmetric about the estimate" in fault
    assert "(found -1 (-3 to -0.5))" in fault


def test_a_lopsided_interval_beside_raw_numbers_is_remarked_on(review, reading) -> None:
    own = {"estimate": -0.9, "ci_low": -3.0, "ci_high": -0.5}
    assert "not symmetric" in remarks(review, {"a.toml": reading("MV", "pain", values=pain(**own))})
    even = {"estimate": -0.9, "ci_low": -1.5, "ci_high": -0.3}
    assert "not symmetric" not in remarks(review, {"a.toml": reading("MV", "pain", values=pain(**even))})


def test_the_reports_own_effect_is_held_against_its_numbers(review, reading) -> None:
    counts = {
        "intervention_events": 20,
        "intervention_total": 100,
        "comparator_events": 40,
        "comparator_total": 100,
    }
    own = {**counts, "estimate": 0.5}
    assert "own effect" not in remarks(review, {"a.toml": reading("MV", values=own)})
    swapped = {**counts, "estimate": 2.0}
    assert "its raw numbers give 0.5" in remarks(review, {"a.toml": reading("MV", values=swapped)})


def test_two_readings_in_one_file_are_remarked_on(review) -> None:
    head = "trial,published,report,extractor,outcome,estimate,ci_low,ci_high,locator\n"
    rows = "".join(f"HW-01,2025,HW-01-a,{who},pain,-1,-1.5,-0.5,p\n" for who in ("MV", "OK"))
    assert "two people should extract apart" in remarks(review, {"a.csv": head + rows})


def test_a_silent_source_and_a_changed_strategy_are_remarked_on(review) -> None:
    run = {"source": "register A", "strategy": "warm*", "new_hits": 0, "by": "IN"}
    review.update({"s.json": record("search run", **run, hits=9, date="2026-01-04")})
    again = record("search run", **{**run, "strategy": "warm* OR heat*"}, hits=0, date="2026-01-05")
    found = remarks(review, {"t.json": again})
    assert "gave hits before and none now" in found
    assert "the strategy differs" in found


# --- entries ---


def test_a_retraction_becomes_an_entry_with_its_cause_and_both_dates(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")}, "2026-01-05")
    review.update({"n.json": notice(date="2026-01-09")}, "2026-01-12")
    (entry,) = review.ledger.live(EntryKind.INTEGRITY)
    assert entry.key == "integrity/HW-01/2026-01-09/retraction"
    assert (entry.cause, entry.true_at, entry.known_at[:10]) == (Cause.RETRACTION, "2026-01-09", "2026-01-12")


def test_each_accepted_file_leaves_a_receipt(review, asset) -> None:
    review.update({"x.csv": asset("good_rows.csv"), "y.json": asset("good_list.json")})
    receipts = {e.body["file"]: e.body for e in review.ledger.live(EntryKind.RECEIPT)}
    assert receipts["x.csv"]["record"] == "extraction"
    assert receipts["y.json"]["record"] == "ongoing trial, screening decision, search run"
    assert receipts["x.csv"]["size"] == len(asset("good_rows.csv"))


def test_a_year_alone_counts_as_its_last_day_but_never_lies_ahead(review) -> None:
    head = "trial,year,report,extractor,outcome,estimate,ci_low,ci_high\n"

    def rows(year: int) -> str:
        return head + "".join(
            f"HW-0{year % 10},{year},r-{year},{who},pain,-1,-1.5,-0.5\n" for who in ("MV", "OK")
        )

    review.update({"a.csv": rows(1948), "b.csv": rows(2026)}, "2026-03-02")
    assert review.ledger.get("report/r-1948").body["published"] == "1948-12-31"
    assert review.ledger.get("report/r-2026").body["published"] == "2026-03-02"
    assert review.result("HW-08", "pain").true_at == "1948-12-31"


def test_every_kind_of_record_becomes_an_entry(review, asset) -> None:
    review.update({"y.json": asset("good_list.json")})
    decision = record(
        "panel decision", recommendation="warm-hands", decision="await", reason="one trial is due",
        votes={"for": 5, "against": 1}, recusals=["maker"], date="2026-01-05", recorded_by="SL",
    )  # fmt: skip
    review.update({"d.json": decision})
    keys = {entry.key for entry in review.ledger.entries if entry.kind is not EntryKind.RECEIPT}
    assert keys == {
        "search/register A/2026-01-05",
        "screening/HW-09-a",
        "ongoing/HW-10",
        "decision/warm-hands/2026-01-05",
    }
