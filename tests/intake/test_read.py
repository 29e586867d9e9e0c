"""What the reader makes of files: records, or one sentence for each fault; never an exception."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from treering import intake
from treering.intake import Dropped
from treering.records import DOMAINS, Extraction, Ongoing, Screening, SearchRun

BROKEN = {
    "bad_events_above_total.toml": "results[1].intervention_events: 124 events are more than the 120 people",
    "bad_unknown_outcome.toml": "no outcome 'failed-first-atempt'; did you mean 'failed-first-attempt'?",
    "bad_no_extractor.toml": "extractor: this field is needed and not there.",
    "bad_unknown_person.toml": "extractor: 'mv' is not in the review's people",
    "bad_person_without_role.toml": "TR is not an extractor (roles: adjudicator, certainty rater).",
    "bad_comma_decimal.toml": "a comma in a number can mean two things",
    "bad_unit_in_cell.toml": "this is not a plain number",
    "bad_negative_count.toml": "a count can't be below 0 (found -4).",
    "bad_half_person.toml": "counted in whole numbers (found 24.5).",
    "bad_not_a_number.toml": "out of any sensible range (found nan).",
    "bad_unknown_field.toml": "no field 'intervention_event'; did you mean 'intervention_events'?",
    "bad_missing_total.toml": "Missing: comparator_total.",
    "bad_no_such_day.toml": "published: there is no such day (found '2025-02-30').",
    "bad_written_day.toml": "published: write the date as YYYY-MM-DD",
    "bad_future_date.toml": "published: 2031-03-14 lies after this update's date, 2026-01-05.",
    "bad_no_date.toml": "published: say when report HW-01-a appeared",
    "bad_unknown_record.toml": "there is no kind of record (found 'extracton'); did you mean 'extraction'?",
    "bad_no_record.toml": "record: say what this is",
    "bad_slash_in_id.toml": "trial: an id holds letters, digits",
    "bad_unplanned_subgroup.toml": "'weekday' is not a planned subgroup",
    "bad_more_than_randomised.toml": "239 people analysed, but only 200 randomised.",
    "bad_arms_do_not_add.toml": "the arms add to 240, but 250 were randomised.",
    "bad_half_written.toml": "not valid TOML, or only half written",
    "bad_zero_bytes.toml": "zero bytes",
    "bad_empty.csv": "the file is empty.",
    "bad_utf16.csv": "UTF-16; save it as UTF-8.",
    "bad_latin1.csv": "line 2 is not UTF-8 text",
    "bad_semicolons.csv": "separated by semicolons",
    "bad_comma_decimal.csv": "row 2, column intervention_mean: a comma in a number",
    "bad_short_row.csv": "row 2: the row has 4 cells where row 1 names 5 columns.",
    "bad_unknown_column.csv": "no column 'itervention_mean'; did you mean 'intervention_mean'?",
    "bad_no_extractor_column.csv": "the column 'extractor' is missing.",
    "bad_empty_extractor.csv": "row 2, column extractor: this cell is needed and empty.",
    "bad_open_quote.csv": "not valid CSV, or only half written",
    "bad_header_only.csv": "column names and no row",
    "bad_interval.csv": "row 2, column estimate: -0.9 lies outside its own interval, -0.7 to -0.2.",
    "bad_half_written.json": "not valid JSON, or only half written",
    "bad_repeated_field.json": "a field stands twice in one record: trial.",
    "bad_empty_list.json": "the list holds no record.",
    "bad_no_table.json": "record 1: a record is a table of named fields.",
    "bad_ending.docx": "ends in .docx; intake reads .toml, .json and .csv.",
    "bad_no_ending": "has no ending",
}


@pytest.mark.parametrize("name", BROKEN)
def test_a_broken_file_goes_back_whole_with_a_sentence(review, asset, name) -> None:
    checked = review.check({name: asset(name)})
    assert [file.name for file in checked.returned] == [name]
    assert checked.records == ()
    sentences = [str(fault) for fault in checked.faults_of(checked.returned[0])]
    assert any(BROKEN[name] in sentence for sentence in sentences), sentences
    assert all(sentence.startswith(name) for sentence in sentences)


def test_every_broken_asset_is_named_here() -> None:
    folder = Path(__file__).parent.parent / "assets" / "intake"
    assert {path.name for path in folder.glob("bad_*")} == set(BROKEN)


def test_toml_json_and_csv_give_the_same_reading(review, asset) -> None:
    toml = asset("good_extraction.toml")
    (located,) = intake.read_records([Dropped.of("a.toml", toml)]).records
    record = located.record
    assert isinstance(record, Extraction)
    again = json.dumps(record.model_dump(mode="json")).encode()
    (from_json,) = intake.read_records([Dropped.of("a.json", again)]).records
    assert from_json.record == record
    row = intake.read_records([Dropped.of("a.csv", asset("good_rows.csv"))]).records[0].record
    assert isinstance(row, Extraction)
    assert row.results[0].numbers() == record.results[0].numbers()
    assert row.subgroups == record.subgroups


def test_good_files_are_accepted_and_give_their_records(review, asset) -> None:
    names = ("good_extraction.toml", "good_rows.csv", "good_list.json")
    checked = review.check({name: asset(name) for name in names})
    assert checked.faults == ()
    assert len(checked.accepted) == 3
    kinds = [type(item.record) for item in checked.records]
    assert kinds.count(Extraction) == 4
    assert {SearchRun, Screening, Ongoing} <= set(kinds)


def test_a_byte_order_mark_is_no_fault(review, asset) -> None:
    checked = review.check({"a.csv": b"\xef\xbb\xbf" + asset("good_rows.csv")})
    assert checked.faults == ()


def test_an_empty_cell_is_not_reported_and_zero_is_zero(asset) -> None:
    text = b"trial,report,extractor,outcome,intervention_events,comparator_events\nA,A-1,MV,pain,0,\n"
    (located,) = intake.read_records([Dropped.of("a.csv", text)]).records
    assert located.record.results[0].numbers() == {"intervention_events": 0}


@pytest.mark.parametrize("written", ["NR", "n/a", "-", "not reported", "?"])
def test_words_for_absent_are_not_taken_for_numbers(written) -> None:
    text = f"trial,report,extractor,outcome,intervention_mean\nA,A-1,MV,pain,{written}\n".encode()
    parsed = intake.read_records([Dropped.of("a.csv", text)])
    assert parsed.records == ()
    assert "leave the field empty when the report gives no number" in str(parsed.faults[0])


@pytest.mark.parametrize(
    ("written", "number"), [("3.10", 3.1), ("-2", -2), ("−0.5", -0.5), ("1e3", 1000), ("007", 7), (" 4 ", 4)]
)
def test_plain_numbers_are_read_as_written(written, number) -> None:
    text = f"trial,report,extractor,outcome,estimate\nA,A-1,MV,pain,{written}\n".encode()
    (located,) = intake.read_records([Dropped.of("a.csv", text)]).records
    assert located.record.results[0].estimate == number


def test_every_fault_of_a_file_is_named_at_once(review) -> None:
    head = "trial,published,report,extractor,outcome,intervention_mean\n"
    faults = review.faults({"a.csv": head + "A,2025,A-1,MV,pain,3.1 min\nA,x,A-1,MV,pain,1\n"})
    assert [fault.split(": ")[0] for fault in faults] == [
        "a.csv, row 2, column intervention_mean",
        "a.csv, row 3, column published",
    ]


ENDINGS = st.sampled_from([".toml", ".json", ".csv", "", ".xlsx"])
JSON = st.recursive(
    st.none()
    | st.booleans()
    | st.floats()
    | st.integers()
    | st.text(max_size=8)
    | st.sampled_from(["extraction", "waiver"]),
    lambda inner: (
        st.lists(inner, max_size=3)
        | st.dictionaries(
            st.sampled_from(["record", "trial", "results", "values", "date", "outcome"])
            | st.text(max_size=4),
            inner,
            max_size=4,
        )
    ),
    max_leaves=8,
)


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=st.binary(max_size=300) | st.text(max_size=200).map(str.encode), ending=ENDINGS)
def test_no_bytes_make_the_reader_raise(review, content, ending) -> None:
    checked = review.check({f"x{ending}": content})
    assert bool(checked.faults) != bool(checked.records)


@settings(max_examples=200, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=JSON)
def test_no_json_makes_the_intake_raise(review, content) -> None:
    checked = review.check({"x.json": json.dumps(content)})
    assert bool(checked.faults) != bool(checked.records)
    for fault in checked.faults:
        str(fault).encode("utf-8")


@pytest.mark.parametrize(
    "text", ["[" * 100_000, '{"a":' * 100_000, "1" * 5000, '"\\ud800"', '{"record": "\\ud800"}']
)
def test_hostile_json_is_a_fault(review, text) -> None:
    assert len(review.check({"x.json": text}).faults) >= 1


def test_deep_toml_is_a_fault(review) -> None:
    assert len(review.check({"x.toml": "a = " + "[" * 50_000}).faults) == 1


RECORDS = [
    {
        "record": "adjudication",
        "trial": "A",
        "outcome": "pain",
        "adjudicator": "TR",
        "values": {"estimate": 1},
        "not_reported": ["ci_low"],
        "study": {"randomised": 3},
        "locator": "p",
        "reason_class": "slip",
        "reason": "r",
    },
    {
        "record": "risk-of-bias judgement",
        "trial": "A",
        "outcome": "pain",
        "overall": "Low",
        "date": "2026-01-01",
        "domains": dict.fromkeys(DOMAINS, "Low"),
        "assessors": ["MV", "OK"],
        "support": {"overall": "s"},
    },
    {
        "record": "certainty judgement",
        "outcome": "pain",
        "rating": "Low",
        "reasons": {"imprecision": "wide"},
        "raters": ["TR", "SL"],
        "version": 1,
        "numbers": {"k": 3},
        "date": "2026-01-01",
    },
    {
        "record": "integrity notice",
        "trial": "A",
        "notice": "retraction",
        "date": "2026-01-01",
        "reason": "r",
        "seen_by": "IN",
    },
    {
        "record": "panel decision",
        "recommendation": "r1",
        "decision": "await",
        "reason": "r",
        "votes": {"for": 3},
        "date": "2026-01-01",
        "recorded_by": "SL",
    },
    {"record": "acknowledgement", "notice": "n", "person": "chair", "date": "2026-01-01"},
    {"record": "withdrawal", "key": "k", "reason": "r", "by": "SL", "date": "2026-01-01"},
    {"record": "waiver", "trial": "A", "outcome": "pain", "person": "SL", "reason": "r"},
]


def _paths(item, path=()):
    """Return the paths of all fields of a nested record."""
    inner = item.items() if isinstance(item, dict) else enumerate(item) if isinstance(item, list) else ()
    return [path, *(p for name, value in inner for p in _paths(value, (*path, name)))]


@settings(max_examples=120, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_no_wrong_value_in_a_sound_record_makes_the_intake_raise(review, asset, data) -> None:
    (located,) = intake.read_records([Dropped.of("a.toml", asset("good_extraction.toml"))]).records
    extraction = located.record.model_dump(mode="json", exclude_none=True)
    listed = json.loads(asset("good_list.json"))
    record = json.loads(json.dumps(data.draw(st.sampled_from([extraction, *listed, *RECORDS]))))
    path = data.draw(st.sampled_from(_paths(record)[1:]))
    inner = record
    for step in path[:-1]:
        inner = inner[step]
    inner[path[-1]] = data.draw(JSON)
    checked = review.check({"x.json": json.dumps(record)})
    assert bool(checked.faults) != bool(checked.records)
    for entry in intake.entries_for(checked, review.protocol, review.ledger, "2026-01-05"):
        json.dumps(dict(entry.body), allow_nan=False).encode("utf-8")
