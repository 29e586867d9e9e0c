"""Two readings become one verified result, or wait for someone."""

from __future__ import annotations

import json

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from treering import intake
from treering.intake import compare_readings
from treering.intake.reread import is_drawn
from treering.terms import Cause

FFA = "failed-first-attempt"


def counts(
    events: int, *, total: int = 120, comparator: int = 36, comparator_total: int = 119
) -> dict[str, int]:
    """Counts of HW-01; MV reads 24 events by default."""
    return {
        "intervention_events": events,
        "intervention_total": total,
        "comparator_events": comparator,
        "comparator_total": comparator_total,
    }


def test_two_equal_readings_are_verified_as_agreed(review, reading) -> None:
    settled = review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    assert settled.waiting == ()
    result = review.result("HW-01", FFA)
    assert result.body["values"] == {
        "comparator_events": 36,
        "comparator_total": 119,
        "intervention_events": 24,
        "intervention_total": 120,
    }
    assert result.body["subgroup"] == {"setting": "ward"}
    assert (result.cause, result.true_at) == (Cause.NEW_TRIAL, "2025-03-14")
    verification = review.ledger.get(f"verification/HW-01/{FFA}").body
    assert verification["basis"] == "agreed"
    assert verification["extractors"] == ["MV", "OK"]
    assert verification["fields"] == 4
    study = review.ledger.get("study/HW-01").body
    assert (study["randomised"], study["year"]) == (240, 2025)
    report = review.ledger.get("report/HW-01-a").body
    assert (report["published"], report["citation"]) == ("2025-03-14", "Invented, 2025")


def test_the_second_reading_may_come_a_week_later(review, reading) -> None:
    waiting = review.update({"a.toml": reading("MV")}, "2026-01-05").waiting
    assert [item["needs"] for item in waiting] == ["second reading"]
    assert review.result("HW-01", FFA) is None
    assert review.update({"b.toml": reading("OK")}, "2026-01-12").waiting == ()
    assert review.result("HW-01", FFA).known_at.startswith("2026-01-12")


def test_a_second_run_on_the_same_state_adds_nothing(review, reading) -> None:
    files = {"a.toml": reading("MV"), "b.toml": reading("OK")}
    review.update(files)
    before = len(review.ledger.entries)
    assert review.update(files, "2026-01-12").entries == ()
    assert len(review.ledger.entries) == before


def test_file_names_do_not_change_what_is_stored(demo_protocol, review, reading) -> None:
    other = type(review)(demo_protocol)
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    other.update({"z.toml": reading("MV"), "y.toml": reading("OK")})

    def content(ledger):
        return [(e.seq, e.key, e.body) for e in ledger.entries if not e.key.startswith("receipt/")]

    assert content(review.ledger) == content(other.ledger)


def test_a_difference_waits_with_both_readings_and_places(review, reading) -> None:
    other = reading("OK", values=counts(42), locator="page 4")
    (item,) = review.update({"a.toml": reading("MV"), "b.toml": other}).waiting
    assert item["needs"] == "adjudication"
    assert item["differences"] == [
        {
            "field": "intervention_events",
            "first": 24,
            "second": 42,
            "first_place": "table 2",
            "second_place": "page 4",
        }
    ]
    assert review.result("HW-01", FFA) is None


def test_zero_and_not_reported_differ(review, reading) -> None:
    burns = counts(0, comparator=0)
    silent = reading("OK", "skin-burns", values={}, not_usable="burns are not reported")
    (item,) = review.update({"a.toml": reading("MV", "skin-burns", values=burns), "b.toml": silent}).waiting
    assert {"intervention_events", "not_usable"} <= {d["field"] for d in item["differences"]}


def test_an_adjudication_settles_the_difference(review, reading, adjudication) -> None:
    wrong = counts(42)
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK", values=wrong)}, "2026-01-05")
    assert review.update({"c.toml": adjudication()}, "2026-01-12").waiting == ()
    result = review.result("HW-01", FFA).body
    assert result["values"]["intervention_events"] == 24
    assert result["locators"]["intervention_events"] == "table 2, row 1"
    verification = review.ledger.get(f"verification/HW-01/{FFA}").body
    assert (verification["basis"], verification["adjudicator"]) == ("adjudicated", "TR")
    assert verification["differences"] == [{"field": "intervention_events", "first": 24, "second": 42}]


def test_an_adjudication_may_come_with_the_readings(review, reading, adjudication) -> None:
    wrong = counts(42)
    files = {"a.toml": adjudication(), "b.toml": reading("OK", values=wrong), "c.toml": reading("MV")}
    assert review.update(files).waiting == ()
    assert review.result("HW-01", FFA).body["values"]["intervention_events"] == 24


def test_an_adjudicator_may_find_a_third_value_or_none(review, reading, adjudication) -> None:
    wrong = counts(42)
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK", values=wrong)})
    third = adjudication(values={"intervention_events": 27})
    review.update({"c.toml": third})
    assert review.result("HW-01", FFA).body["values"]["intervention_events"] == 27


def test_an_unresolved_difference_is_a_state_of_its_own(review, reading, adjudication) -> None:
    wrong = counts(42)
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK", values=wrong)})
    open_text = adjudication(
        values={}, unresolved=True, reason="text and table disagree", reason_class="report conflict"
    )
    (item,) = review.update({"c.toml": open_text}).waiting
    assert item["needs"] == "unresolved"
    assert "text and table disagree" in item["why"]
    assert review.update({"d.toml": adjudication()}).waiting == ()


def test_an_adjudication_must_cover_every_difference(review, reading, adjudication) -> None:
    wrong = counts(42, total=118)
    files = {"a.toml": reading("MV"), "b.toml": reading("OK", values=wrong), "c.toml": adjudication()}
    (item,) = review.update(files).waiting
    assert "leaves open: intervention_total" in item["why"]


def test_settled_numbers_are_checked_again(review, reading, adjudication) -> None:
    wrong = counts(42)
    impossible = adjudication(values={"intervention_events": 124})
    files = {"a.toml": reading("MV"), "b.toml": reading("OK", values=wrong), "c.toml": impossible}
    (item,) = review.update(files).waiting
    assert item["needs"] == "sound numbers"
    assert "more than the 120 people" in item["why"]


def test_a_correction_by_one_extractor_waits_for_the_other(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")}, "2026-01-05")
    new = counts(26)
    why = "erratum: two events were missing"
    (item,) = review.update({"c.toml": reading("MV", values=new, correction=why)}, "2026-01-12").waiting
    assert "waits for the second extractor" in item["why"]
    assert review.result("HW-01", FFA).body["values"]["intervention_events"] == 24
    assert review.update({"d.toml": reading("OK", values=new, correction=why)}, "2026-01-19").waiting == ()
    result = review.result("HW-01", FFA)
    assert result.body["values"]["intervention_events"] == 26
    assert (result.cause, result.reason) == (Cause.CORRECTION, why)
    assert result.replaces is not None


def test_a_reading_that_was_used_once_never_makes_a_pair_again(review, reading) -> None:
    review.people(SL={"roles": ("extractor",)})
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    new = {"values": counts(26), "correction": "erratum"}
    assert review.update({"c.toml": reading("MV", **new), "d.toml": reading("SL", **new)}).waiting == ()
    assert review.update({}).waiting == ()
    back = reading("MV", correction="the erratum was withdrawn")
    (item,) = review.update({"e.toml": back}).waiting
    assert item["needs"] == "second reading"
    assert review.result("HW-01", FFA).body["values"]["intervention_events"] == 26


def test_a_new_report_replaces_the_result_and_says_so(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")}, "2026-01-05")
    later = {"report": "HW-01-b", "published": "2025-12-01"}
    values = counts(30, comparator=40)
    files = {n: reading(who, values=values, **later) for n, who in (("c.toml", "MV"), ("d.toml", "OK"))}
    assert review.update(files, "2026-01-12").waiting == ()
    result = review.result("HW-01", FFA)
    assert (result.cause, result.body["report"]) == (Cause.NEW_REPORT, "HW-01-b")
    assert review.ledger.get("report/HW-01-a") is not None
    assert review.ledger.get("study/HW-01").body["year"] == 2025


def test_two_people_on_two_reports_make_no_pair(review, reading) -> None:
    files = {"a.toml": reading("MV"), "b.toml": reading("OK", report="HW-01-b")}
    (item,) = review.update(files).waiting
    assert "different reports" in item["why"]


def test_an_unusable_result_keeps_the_study_in_the_list(review, reading) -> None:
    words = {"values": {}, "not_usable": "only a P value is given"}
    files = {"a.toml": reading("MV", **words), "b.toml": reading("OK", **words)}
    assert review.update(files).waiting == ()
    assert review.result("HW-01", FFA).body["not_usable"] == "only a P value is given"
    assert review.ledger.get("study/HW-01") is not None


def test_measured_numbers_may_differ_within_the_tolerance_and_counts_may_not(review, reading) -> None:
    review.verification(relative_tolerance=0.01)
    pain = {
        "intervention_mean": 3.1,
        "intervention_sd": 2.0,
        "intervention_total": 120,
        "comparator_mean": 4.0,
        "comparator_sd": 2.1,
        "comparator_total": 119,
    }
    near = {**pain, "intervention_mean": 3.11}
    files = {"a.toml": reading("MV", "pain", values=pain), "b.toml": reading("OK", "pain", values=near)}
    assert review.update(files).waiting == ()
    assert review.result("HW-01", "pain").body["values"]["intervention_mean"] == 3.1
    verification = review.ledger.get("verification/HW-01/pain").body
    assert verification["differences"] == [{"field": "intervention_mean", "first": 3.1, "second": 3.11}]
    off = counts(24, comparator_total=120)
    files = {"c.toml": reading("MV"), "d.toml": reading("OK", values=off)}
    (item,) = review.update(files).waiting
    assert item["differences"][0]["field"] == "comparator_total"


def test_a_waiver_lets_one_reading_in_once(review, reading) -> None:
    waiver = json.dumps(
        {"record": "waiver", "trial": "HW-01", "outcome": FFA, "person": "SL", "reason": "late"}
    )
    assert review.update({"a.toml": reading("MV"), "w.json": waiver}).waiting == ()
    assert review.ledger.get(f"verification/HW-01/{FFA}").body["basis"] == "waiver"
    new = counts(26)
    (item,) = review.update({"c.toml": reading("MV", values=new, correction="slip")}).waiting
    assert item["needs"] == "second reading"


def test_a_second_reading_replaces_a_waiver(review, reading) -> None:
    waiver = json.dumps(
        {"record": "waiver", "trial": "HW-01", "outcome": FFA, "person": "SL", "reason": "late"}
    )
    review.update({"a.toml": reading("MV"), "w.json": waiver})
    assert review.update({"b.toml": reading("OK")}, "2026-01-12").waiting == ()
    assert review.ledger.get(f"verification/HW-01/{FFA}").body["basis"] == "agreed"


def test_readers_who_differ_on_the_trial_itself_need_an_adjudicator(review, reading, adjudication) -> None:
    files = {"a.toml": reading("MV"), "b.toml": reading("OK", randomised=250)}
    (item,) = review.update(files).waiting
    assert item["differences"][0]["field"] == "study.randomised"
    settled = review.update({"c.toml": adjudication(values={}, locator=None, study={"randomised": 250})})
    assert settled.waiting == ()
    assert review.ledger.get("study/HW-01").body["randomised"] == 250


def test_a_drawn_share_of_agreed_fields_is_read_a_third_time(review, reading) -> None:
    review.verification(reread_share=1.0)
    files = {"a.toml": reading("MV"), "b.toml": reading("OK")}
    (task,) = review.update(files).third_readings
    assert review.update({}).third_readings == (task,)
    assert (task["trial"], len(task["fields"])) == ("HW-01", 4)
    review.people(SL={"roles": ("extractor",)})
    done = review.update({"c.toml": reading("SL", third_reading=True)})
    assert (done.third_readings, done.waiting) == ((), ())
    assert review.ledger.get(f"verification/HW-01/{FFA}").body["reread"] is True


def test_a_third_reading_that_differs_holds_nothing_back_and_asks_for_a_correction(review, reading) -> None:
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    third = reading("TR", values={"intervention_events": 25}, third_reading=True)
    (item,) = review.update({"c.toml": third}).waiting
    assert (item["needs"], item["differences"][0]["second"]) == ("correction", 25)
    assert review.result("HW-01", FFA).body["values"]["intervention_events"] == 24


def test_the_drawn_share_is_about_the_planned_one() -> None:
    drawn = sum(is_drawn(f"HW-{n}/pain/r/intervention_mean/3.1", 0.10) for n in range(4000))
    assert 330 < drawn < 470  # 400 expected, 3.7 standard deviations of a binomial draw


def test_a_year_and_a_day_of_that_year_do_not_contradict(review, reading) -> None:
    files = {"a.toml": reading("MV", published="2025"), "b.toml": reading("OK", published="2025-03-14")}
    assert review.update(files).waiting == ()
    assert review.ledger.get("report/HW-01-a").body["published"] == "2025-03-14"
    other = {"c.toml": reading("MV", "skin-burns", published="2024"), "d.toml": reading("OK", "skin-burns")}
    (item,) = review.update(other).waiting
    assert item["differences"][0]["field"] == "study.published"


def test_trials_that_a_crossing_rests_on_are_read_again_whole(review, reading) -> None:
    review.verification(reread_share=0.0)
    review.update({"a.toml": reading("MV"), "b.toml": reading("OK")})
    assert intake.settle(review.ledger, review.protocol).third_readings == ()
    (task,) = intake.settle(review.ledger, review.protocol, read_again={"HW-01"}).third_readings
    assert task["fields"] == [
        "intervention_events",
        "intervention_total",
        "comparator_events",
        "comparator_total",
    ]


def test_agreement_is_counted_by_field_and_pair(review, reading, adjudication) -> None:
    other = reading("OK", values=counts(42))
    review.update({"a.toml": reading("MV"), "b.toml": other, "c.toml": adjudication()})
    files = {n: reading(w, trial="HW-02", report="HW-02-a") for n, w in (("d.toml", "MV"), ("e.toml", "OK"))}
    review.update(files)
    found = intake.agreement(review.ledger)
    assert found["fields"][0] == {"field": "intervention_events", "compared": 2, "differed": 1}
    assert found["pairs"] == [{"first": "MV", "second": "OK", "compared": 8, "differed": 1}]


# --- rules ---

NUMBERS = st.dictionaries(
    st.sampled_from(["intervention_events", "comparator_events", "intervention_mean", "estimate"]),
    st.integers(0, 4) | st.sampled_from([0.5, 1.5, 1.505]),
)


def body(values: dict) -> dict:
    """Shape numbers as a reading's body."""
    return {"values": values, "locators": {}, "not_usable": None, "subgroup": {}, "study": {}, "arms": []}


@given(first=NUMBERS, second=NUMBERS, tolerance=st.sampled_from([0.0, 0.01]))
def test_a_comparison_does_not_depend_on_who_is_first(first, second, tolerance) -> None:
    one = compare_readings(body(first), body(second), tolerance=tolerance)
    other = compare_readings(body(second), body(first), tolerance=tolerance)
    assert one.agreed == other.agreed
    assert [(d.field, d.first, d.second) for d in one.differences] == [
        (d.field, d.second, d.first) for d in other.differences
    ]


@given(first=NUMBERS, second=NUMBERS)
def test_without_tolerance_only_equal_readings_agree(first, second) -> None:
    found = compare_readings(body(first), body(second))
    assert (first == second) == (not found.differences)
    assert set(found.agreed) | {d.field for d in found.differences} == set(first) | set(second)


@given(order=st.permutations(["MV", "OK", "adjudication", "bias"]), cut=st.integers(1, 3))
@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
def test_the_verified_result_is_the_same_in_one_drop_or_two(
    demo_protocol, review, reading, adjudication, order, cut
) -> None:
    files = {
        "MV": reading("MV"),
        "OK": reading("OK", values=counts(42)),
        "adjudication": adjudication(),
        "bias": reading("MV", "skin-burns"),
    }
    once, twice = type(review)(demo_protocol), type(review)(demo_protocol)
    once.update({f"{at}.toml": files[name] for at, name in enumerate(order)})
    parts = [order[:cut], order[cut:]]
    for part in parts:
        twice.update({f"{at}.toml": files[name] for at, name in enumerate(part)})
    # Readings that came after an adjudication sent it back; dropped again, it counts.
    twice.update({"again.toml": files["adjudication"]})
    key = f"result/HW-01/{FFA}"
    assert once.ledger.get(key).body == twice.ledger.get(key).body
