"""What was known, and what was true, at any moment."""

from __future__ import annotations

import pandas as pd
import pytest

from treering.errors import StoreError
from treering.records import NewEntry
from treering.store.projection import BODY_FIELDS
from treering.terms import EntryKind, Judgement

MARCH, APRIL, MAY = (f"2026-0{month}-02T06:00:00Z" for month in (3, 4, 5))


@pytest.fixture
def history(evidence, study, version):
    """Three runs: two trials; a correction of one, published in 2024; a withdrawal and an older trial."""
    first = study("T1", true_at="2020-01-01"), study("T2", true_at="2021-01-01"), version(1)
    evidence.append(first, known_at=MARCH)
    corrected = study("T1", true_at="2024-06-01", randomised=118, replaces=0, by="CD")
    evidence.append([corrected, version(2)], known_at=APRIL)
    gone = NewEntry(EntryKind.WITHDRAWAL, "study/T2", {"reason": "not randomised"}, "2026-05-02", replaces=1)
    evidence.append([gone, study("T0", true_at="1999-01-01"), version(3)], known_at=MAY)
    return evidence


def trials(state, kind=EntryKind.STUDY):
    return [(entry.body["trial"], entry.body["randomised"]) for entry in state.live(kind)]


NOW = [("T0", 120), ("T1", 118)]


def test_now_is_what_is_live(history):
    assert trials(history.state()) == NOW
    assert len(history.state()) == 8


@pytest.mark.parametrize(
    ("number", "expected"),
    [(1, [("T1", 120), ("T2", 120)]), (2, [("T1", 118), ("T2", 120)]), (3, NOW)],
)
def test_version_sees_what_lay_before_it(history, number, expected):
    state = history.state(version=number)
    assert trials(state) == expected
    assert len(state) == history.versions()[number - 1]["entries"]
    assert [body.body["version"] for body in state.live(EntryKind.VERSION)] == list(range(1, number))


@pytest.mark.parametrize(
    ("known", "expected"),
    [
        ("2026-03-01", []),
        ("2026-03-02T05:59:59Z", []),
        ("2026-03-02T07:00:00+01:00", [("T1", 120), ("T2", 120)]),
        ("2026-03-02", [("T1", 120), ("T2", 120)]),
        ("2026-04-02", [("T1", 118), ("T2", 120)]),
        ("2030-01-01", NOW),
    ],
)
def test_known_on_a_day_counts_all_of_that_day(history, known, expected):
    assert trials(history.state(known=known)) == expected


@pytest.mark.parametrize(
    ("true", "expected"),
    [
        ("1998-12-31", []),
        ("2020-01-01", [("T0", 120), ("T1", 120)]),
        ("2024-05-31", [("T0", 120), ("T1", 120), ("T2", 120)]),
        ("2024-06-01", [("T0", 120), ("T1", 118), ("T2", 120)]),
        ("2026-05-02", NOW),
    ],
)
def test_true_on_a_day_with_what_is_known_now(history, true, expected):
    assert trials(history.state(true=true)) == expected


def test_both_clocks_at_once(history):
    assert trials(history.state(known="2026-04-02", true="2023-01-01")) == [("T1", 120), ("T2", 120)]
    assert trials(history.state(version=1, true="2020-12-31")) == [("T1", 120)]


@pytest.mark.parametrize(
    ("limit", "message"),
    [
        ({"version": 4}, "version 4: There is no such version"),
        ({"version": 0}, "version 0: There is no such version"),
        ({"known": "May"}, "offset from UTC"),
        ({"true": "2026"}, "YYYY-MM-DD"),
    ],
    ids=str,
)
def test_moments_that_are_none_are_refused(history, limit, message):
    with pytest.raises(StoreError, match=message):
        history.state(**limit)


def test_replaced_and_withdrawn_entries_stay_in_sight(history):
    state = history.state()
    assert [entry.seq for entry in state.all(EntryKind.STUDY)] == [0, 1, 3, 6]
    assert [entry.seq for entry in state.history("study/T1")] == [0, 3]
    assert [entry.kind for entry in state.history("study/T2")] == [EntryKind.STUDY, EntryKind.WITHDRAWAL]
    assert state.get("study/T1").replaces == 0
    assert state.get("study/T2") is None
    assert state.get("study/T9") is None
    assert state.at(1).body["trial"] == "T2"
    assert history.state(version=1).at(3) is None


def test_frame_has_a_row_for_each_live_entry(history):
    frame = history.state().frame(EntryKind.STUDY)
    assert isinstance(frame, pd.DataFrame)
    assert frame[["trial", "randomised", "seq", "by", "true_at"]].to_dict("list") == {
        "trial": ["T0", "T1"],
        "randomised": [120, 118],
        "seq": [6, 3],
        "by": ["AB", "CD"],
        "true_at": ["1999-01-01", "2024-06-01"],
    }
    assert len(history.state().frame("study", history=True)) == 4


def test_frame_without_entries_has_the_same_columns(history):
    frame = history.state(known="2000-01-01").frame(EntryKind.STUDY)
    assert list(frame.columns) == list(history.state().frame(EntryKind.STUDY).columns)
    assert len(frame) == 0


def test_frame_keeps_apart_fields_of_the_same_name(evidence, moment):
    body = {"source": "register", "date": "2026-05-01", "by": "EF", "hits": 7, "filter": "none"}
    entry = NewEntry(EntryKind.SEARCH, "search/register/2026-05-01", body, "2026-05-01", "AB")
    evidence.append([entry], known_at=moment)
    row = evidence.state().frame(EntryKind.SEARCH).iloc[0]
    assert (row["by"], row["entry_by"], row["filter"], row["hits"]) == ("EF", "AB", "none", 7)


def test_versions_entries_and_heads_agree(history):
    bodies = history.versions()
    assert [body["version"] for body in bodies] == [1, 2, 3]
    assert [history.head(body["entries"]).root for body in bodies] == [body["root"] for body in bodies]
    assert [entry.seq for entry in history.entries(since=2, until=5)] == [2, 3, 4]
    assert [entry.seq for entry in history.entries(since=6, until=99)] == [6, 7]
    with pytest.raises(StoreError, match="no tree of this size"):
        history.head(10)


def test_typed_rows_hold_the_body_with_real_types(evidence, moment):
    body = {
        "trial": "T1",
        "outcome": "pain",
        "report": "R1",
        "domains": {"selection": Judgement.LOW},
        "overall": Judgement.SOME_CONCERNS,
        "assessors": ["AB", "CD"],
    }
    entry = NewEntry(EntryKind.RISK_OF_BIAS, "bias/T1/pain", body, "2026-05-01")
    evidence.append([entry], known_at=moment)
    (row,) = evidence.typed_rows(EntryKind.RISK_OF_BIAS)
    assert row == {"entry": 0, "support": None} | body
    assert list(row) == ["entry", *BODY_FIELDS[EntryKind.RISK_OF_BIAS]]


def test_state_after_entries_is_the_one_they_would_leave(history, study, moment):
    corrected = study("T1", true_at="2026-05-01", randomised=117, replaces=3)
    entries = [study("T5"), corrected, study("T0", true_at="1999-01-01")]
    ahead = history.state().after(entries, known_at=moment)
    assert trials(ahead) == [("T0", 120), ("T1", 117), ("T5", 120)]
    assert history.head().size == len(history.state()) == 8
    history.append(entries, known_at=moment)
    assert [(entry.seq, entry.key, entry.body) for entry in history.state().everything()] == [
        (entry.seq, entry.key, entry.body) for entry in ahead.everything()
    ]


def test_state_after_nothing_new_is_the_same(history, study):
    state = history.state()
    assert state.after([study("T0", true_at="1999-01-01")], known_at=MAY) is state


@pytest.mark.parametrize("wrong", [{"replaces": None, "year": 1}, {"replaces": 3, "year": "x"}], ids=str)
def test_state_after_entries_refuses_what_the_ledger_would(history, study, wrong):
    with pytest.raises(StoreError):
        history.state().after([study("T1", **wrong)], known_at=MAY)


def test_state_without_entries_shows_what_they_replaced(history):
    state = history.state().without(lambda entry: entry.seq == 3)
    assert trials(state) == [("T0", 120), ("T1", 120)]
    assert [entry.seq for entry in state.everything()] == [0, 1, 2, 4, 5, 6, 7]
