"""What the ledger takes, what it skips and what it refuses."""

from __future__ import annotations

from dataclasses import replace

import pytest

from treering import store
from treering.errors import (
    CanonicalError,
    KnownDateError,
    ReplacementError,
    StoreError,
    TreeHeadError,
    VersionGapError,
)
from treering.records import NewEntry
from treering.store import merkle
from treering.store.canonical import library_bytes
from treering.store.chain import check_links
from treering.store.entries import entry_value
from treering.terms import Cause, EntryKind


def withdrawal(key: str, replaces: int | None, reason: str = "entered twice") -> NewEntry:
    return NewEntry(EntryKind.WITHDRAWAL, key, {"reason": reason}, "2026-05-04", "CD", replaces=replaces)


def test_entries_come_back_as_they_were_given(evidence, study, moment):
    given = study("T1", cause=Cause.NEW_TRIAL, reason="first report", note={"unknown": [1, 2.5, None]})
    (laid,) = evidence.append([given], known_at=moment)
    assert (laid.seq, laid.known_at, laid.kind, laid.key) == (0, moment, EntryKind.STUDY, "study/T1")
    assert (laid.cause, laid.reason, laid.by, laid.true_at) == (given.cause, given.reason, "AB", "2021-03-01")
    assert laid.body == given.body
    assert list(evidence.entries()) == [laid]


def test_bytes_are_those_of_the_library(evidence, study, moment):
    first, second = study("T1"), study("Ü2", reason='a "quoted" reason\nwith, \\ and \u20ac', title="x" * 9)
    laid = evidence.append([first, second], known_at=moment)
    expected = entry_value(second, seq=1, known_at=moment, previous=laid[0].hash)
    assert laid[1].canonical == library_bytes(expected)


def test_ledger_keeps_its_own_rules(evidence, study, moment):
    for start in range(0, 600, 150):
        evidence.append([study(f"T{number}") for number in range(start, start + 150)], known_at=moment)
    rows = list(evidence.chain_rows())
    assert check_links(rows)[0] == 600
    leaves = [merkle.leaf_hash(canonical) for _, canonical, _ in rows]
    for size in (0, 1, 255, 256, 257, 511, 512, 600):
        assert evidence.head(size).root == merkle.root(size, merkle.nodes_of(leaves)).hex()
    assert evidence.head() == evidence.head(600)


def test_another_process_goes_on_where_the_first_stopped(evidence, target, study, moment):
    evidence.append([study(f"T{number}") for number in range(300)], known_at=moment)
    with store.open_store(target) as other:
        other.append([study("U1")], known_at=moment)
    evidence.append([study("U2")], known_at=moment)
    assert check_links(evidence.chain_rows())[0] == 302
    leaves = [merkle.leaf_hash(canonical) for _, canonical, _ in evidence.chain_rows()]
    assert evidence.head().root == merkle.root(302, merkle.nodes_of(leaves)).hex()


def test_second_run_adds_nothing(evidence, study, moment):
    entries = [study("T1"), study("T2")]
    evidence.append(entries, known_at=moment)
    head = evidence.head()
    assert evidence.append(entries, known_at="2026-05-11T06:00:00Z") == []
    assert evidence.head() == head


@pytest.mark.parametrize(
    "change", [{"by": "CD"}, {"true_at": "2021-03-02"}, {"randomised": 121}], ids=["by", "true_at", "body"]
)
def test_what_differs_from_the_live_entry_is_a_correction_that_must_name_it(evidence, study, moment, change):
    evidence.append([study("T1")], known_at=moment)
    with pytest.raises(
        ReplacementError, match=r"already has a live entry.*Expected: 0\..*name it in replaces"
    ):
        evidence.append([study("T1", **change)], known_at=moment)
    (laid,) = evidence.append([study("T1", replaces=0, **change)], known_at=moment)
    assert (laid.seq, laid.replaces) == (1, 0)


def test_whole_numbers_are_the_same_with_and_without_a_point(evidence, study, moment):
    evidence.append([study("T1", randomised=120)], known_at=moment)
    assert evidence.append([study("T1", randomised=120.0)], known_at=moment) == []


def test_what_is_replaced_must_be_live(evidence, study, moment):
    evidence.append([study("T1"), study("T2")], known_at=moment)
    evidence.append([study("T1", replaces=0, year=2020)], known_at=moment)
    for wrong in (0, 1, 7):
        with pytest.raises(ReplacementError, match="names an entry that is not live"):
            evidence.append([study("T1", replaces=wrong, year=2019)], known_at=moment)
    with pytest.raises(ReplacementError, match="nothing is live"):
        evidence.append([study("T9", replaces=0)], known_at=moment)


def test_replacement_keeps_the_kind(evidence, study, moment):
    evidence.append([study("T1")], known_at=moment)
    other = NewEntry(EntryKind.WITHDRAWAL, "study/T9", {"reason": "x"}, "2026-05-04", replaces=0)
    with pytest.raises(ReplacementError):
        evidence.append([other], known_at=moment)


def test_withdrawal_leaves_its_place_marked_and_frees_the_key(evidence, study, moment):
    evidence.append([study("T1")], known_at=moment)
    evidence.append([withdrawal("study/T1", 0)], known_at=moment)
    assert evidence.state().get("study/T1") is None
    assert evidence.state().live(EntryKind.STUDY) == []
    assert [entry.kind for entry in evidence.state().history("study/T1")] == ["study", "withdrawal"]
    assert evidence.append([withdrawal("study/T1", 0)], known_at=moment) == []
    with pytest.raises(ReplacementError, match="without a live entry"):
        evidence.append([withdrawal("study/T1", 1, "again")], known_at=moment)
    (back,) = evidence.append([study("T1")], known_at=moment)
    assert evidence.state().get("study/T1") == back


def test_known_date_never_goes_back(evidence, study, moment):
    evidence.append([study("T1")], known_at=moment)
    head = evidence.head()
    with pytest.raises(KnownDateError, match="Set the clock right"):
        evidence.append([study("T2")], known_at="2026-05-04T05:59:59Z")
    assert evidence.head() == head


@pytest.mark.parametrize("value", ["2026-05-04", "2026-05-04T06:00:00", "yesterday"])
def test_known_date_needs_a_time_with_offset(evidence, study, value):
    with pytest.raises(StoreError, match="offset from UTC"):
        evidence.append([study("T1")], known_at=value)


def test_known_date_is_kept_in_utc(evidence, study):
    (laid,) = evidence.append([study("T1")], known_at="2026-05-04T08:00:00.75+02:00")
    assert laid.known_at == "2026-05-04T06:00:00Z"


@pytest.mark.parametrize("value", ["2026", "04.05.2026", "20260504", "2026-02-30", ""])
def test_true_date_is_a_full_iso_date(evidence, study, moment, value):
    with pytest.raises(StoreError, match="YYYY-MM-DD"):
        evidence.append([study("T1", true_at=value)], known_at=moment)


@pytest.mark.parametrize(
    ("value", "found"),
    [
        (float("nan"), "nan"),
        (float("inf"), "inf"),
        (2**53, "9007199254740992"),
        ({1: 2}, "1"),
        ("\ud800", "ud800"),
    ],
)
def test_values_without_canonical_form_are_refused_by_name(evidence, study, moment, value, found):
    with pytest.raises(CanonicalError, match=rf"study/T1.*detail\.values\[1\].*{found}"):
        evidence.append([study("T1", detail={"values": [0, value]})], known_at=moment)
    assert evidence.head().size == 0


@pytest.mark.parametrize(
    "body",
    [{"randomised": "many"}, {"randomised": 1.5}, {"title": 7}, {"trial": None}, {"title": "nul \x00"}],
    ids=str,
)
def test_values_that_do_not_fit_their_column_are_refused(evidence, study, moment, body):
    field = next(iter(body))
    with pytest.raises(StoreError, match=rf"study study/T1: field {field}.*nothing was stored"):
        evidence.append([study("T0"), replace(study("T1"), body=study("T1").body | body)], known_at=moment)
    assert evidence.head().size == 0


@pytest.mark.parametrize("wrong", [{"by": None}, {"by": 7}, {"by": "a\x00b"}, {"reason": 7}], ids=str)
def test_person_and_reason_are_text(evidence, study, moment, wrong):
    with pytest.raises(StoreError, match=rf"study study/T1: {next(iter(wrong))} must be text"):
        evidence.append([study("T1", **wrong)], known_at=moment)


def test_key_of_another_kind_is_refused(evidence, study, moment):
    with pytest.raises(StoreError, match="begins with study/"):
        evidence.append([replace(study("T1"), key="result/T1")], known_at=moment)


def test_version_states_the_head_before_it(evidence, study, version, moment):
    laid = evidence.append([study("T1"), study("T2"), version(1)], known_at=moment)
    assert laid[-1].body["entries"] == 2
    assert laid[-1].body["root"] == evidence.head(2).root
    assert evidence.versions() == [laid[-1].body]
    assert evidence.append([version(1)], known_at=moment) == []


def test_version_with_another_head_is_refused(evidence, study, version, moment):
    evidence.append([study("T1")], known_at=moment)
    head = evidence.head()
    for wrong in ({"entries": 0, "root": head.root}, {"entries": 1, "root": "00" * 32}, {"entries": 1}):
        with pytest.raises(TreeHeadError, match="does not state the head"):
            evidence.append([version(1, **wrong)], known_at=moment)
    (laid,) = evidence.append([version(1, entries=1, root=head.root)], known_at=moment)
    assert laid.seq == 1


def test_versions_are_numbered_without_a_gap_and_for_good(evidence, version, moment):
    for wrong in (0, 2):
        with pytest.raises(VersionGapError):
            evidence.append([version(wrong)], known_at=moment)
    evidence.append([version(1)], known_at=moment)
    for wrong in (version(1, code_version="2"), withdrawal("version/1", 0)):
        with pytest.raises(VersionGapError, match="for good"):
            evidence.append([wrong], known_at=moment)
    evidence.append([version(2)], known_at=moment)
    assert [body["version"] for body in evidence.versions()] == [1, 2]


def test_heads_are_the_same_on_both_databases(postgres_url, tmp_path, study, version, moment):
    heads = []
    for target in (postgres_url, tmp_path / "evidence.db"):
        with store.create(target, review="invented review") as made:
            made.append([*(study(f"T{number}") for number in range(300)), version(1)], known_at=moment)
            heads.append((made.head(), [entry.canonical for entry in made.entries()]))
    assert heads[0] == heads[1]


def test_proofs_hold_without_the_store(evidence, study, moment):
    evidence.append([study(f"T{number}") for number in range(300)], known_at=moment)
    old = evidence.head()
    evidence.append([study(f"U{number}") for number in range(300)], known_at=moment)
    new = evidence.head()
    entry = next(evidence.entries(since=270))
    steps = [bytes.fromhex(step) for step in evidence.inclusion_proof(270, 600)]
    leaf = merkle.leaf_hash(entry.canonical)
    assert merkle.verify_inclusion(leaf, 270, 600, steps, bytes.fromhex(new.root))
    steps = [bytes.fromhex(step) for step in evidence.consistency_proof(300, 600)]
    roots = bytes.fromhex(old.root), bytes.fromhex(new.root)
    assert merkle.verify_consistency(300, 600, *roots, steps)


def test_what_follows_a_head_is_laid_down_with_what_the_head_covers(evidence, study, version, moment):
    def notices(head):
        told = {"event": "boundary crossed", "person": "P1", "text": f"{head.size} {head.root}"}
        return [
            version(1, entries=head.size, root=head.root),
            NewEntry(EntryKind.NOTICE, "notice/1/S/crossing/P1", told, "2026-05-04"),
        ]

    laid = evidence.append([study("T1")], known_at=moment, then=notices)
    assert [entry.seq for entry in laid] == [0, 1, 2]
    assert laid[2].body["text"] == f"1 {evidence.head(1).root}"
    assert check_links(evidence.chain_rows())[0] == 3


def test_error_in_what_follows_leaves_nothing_behind(evidence, study, moment):
    def fails(head):
        raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        evidence.append([study("T1")], known_at=moment, then=fails)
    assert evidence.head().size == 0
    evidence.append([study("T2")], known_at=moment)
    assert check_links(evidence.chain_rows())[0] == 1
