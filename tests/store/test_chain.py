"""Each broken rule of the ledger gives its own error."""

from __future__ import annotations

from hashlib import sha256

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.errors import BrokenLinkError, EntryGapError, EntryHashError
from treering.records import NewEntry
from treering.store.canonical import canonical_bytes, library_bytes
from treering.store.chain import check_links, stated_previous, stated_seq
from treering.store.entries import entry_bytes, entry_value
from treering.terms import Cause, EntryKind

TEXT = st.text(st.characters(exclude_categories=["Cs"]), max_size=20) | st.sampled_from(
    [',"previous":"00"', '","seq":7,"', '{"seq":1}', "a\\", '\\"previous\\":\\"']
)
ENTRIES = st.builds(
    NewEntry,
    st.sampled_from(EntryKind),
    TEXT,
    st.dictionaries(TEXT, TEXT | st.integers(-5, 5) | st.dictionaries(st.just("previous"), TEXT), max_size=3)
    | st.just({"previous": "ff" * 32, "seq": 3}),
    st.just("2021-03-01"),
    TEXT,
    st.none() | st.sampled_from(Cause),
    st.none() | TEXT,
    st.none() | st.integers(0, 9),
)


def ledger(count, start=0, previous=""):
    rows = []
    for seq in range(start, start + count):
        entry = NewEntry(EntryKind.STUDY, f"study/T{seq}", {"trial": f"T{seq}"}, "2021-03-01")
        value = entry_value(entry, seq=seq, known_at="2026-05-04T06:00:00Z", previous=previous)
        canonical = library_bytes(value)
        rows.append((seq, canonical, sha256(canonical).digest()))
        previous = rows[-1][2].hex()
    return rows


def test_sound_ledger_passes_as_a_whole_and_in_stretches():
    rows = ledger(10)
    assert check_links(rows) == (10, rows[-1][2].hex())
    size, last = check_links(rows[:4])
    assert check_links(rows[4:], size=size, previous=last) == (10, rows[-1][2].hex())
    assert check_links([]) == (0, "")


def test_missing_entry_is_a_gap():
    rows = ledger(6)
    with pytest.raises(EntryGapError, match=r"Entry 3 is missing.*Found: 4\. Expected: 3"):
        check_links(rows[:3] + rows[4:])


def test_swapped_entries_are_a_gap():
    rows = ledger(6)
    with pytest.raises(EntryGapError, match="Entry 2"):
        check_links([*rows[:2], rows[3], rows[2], *rows[4:]])


def test_renumbered_column_does_not_hide_a_gap():
    rows = ledger(6)
    renumbered = rows[:3] + [(seq - 1, canonical, digest) for seq, canonical, digest in rows[4:]]
    with pytest.raises(EntryGapError, match="4 inside the bytes of entry 3"):
        check_links(renumbered)


@given(st.integers(0, 5), st.data())
def test_any_changed_byte_is_found(which, draw):
    rows = ledger(6)
    seq, canonical, digest = rows[which]
    place = draw.draw(st.integers(0, len(canonical) - 1))
    byte = draw.draw(st.integers(0, 255).filter(lambda value: value != canonical[place]))
    rows[which] = (seq, canonical[:place] + bytes([byte]) + canonical[place + 1 :], digest)
    with pytest.raises((EntryHashError, EntryGapError, BrokenLinkError), match=f"ntry {which}"):
        check_links(rows)


def test_rewritten_entry_breaks_the_link_of_the_next():
    rows = ledger(6)
    canonical = rows[2][1].replace(b"study/T2", b"study/X2")
    rows[2] = (2, canonical, sha256(canonical).digest())
    with pytest.raises(BrokenLinkError, match="Entry 3 does not follow"):
        check_links(rows)


def test_entry_without_a_link_is_broken():
    rows = ledger(2)
    stray = ledger(1, start=1)
    with pytest.raises(BrokenLinkError, match="Found: no hash"):
        check_links([rows[0], *stray])


@pytest.mark.parametrize("change", [{"reason": "corrected"}, {"replaces": 1}], ids=str)
def test_entries_with_a_reason_or_a_replacement_are_checked_as_well(change):
    rows = ledger(2)
    entry = NewEntry(EntryKind.STUDY, "study/T9", {"trial": "T9"}, "2021-03-01", **change)
    known = "2026-05-04T06:00:00Z"
    value = entry_value(entry, seq=2, known_at=known, previous=rows[1][2].hex())
    good = library_bytes(value)
    check_links([*rows, (2, good, sha256(good).digest())])
    for wrong, error in (({"seq": 3}, EntryGapError), ({"previous": "00" * 32}, BrokenLinkError)):
        bad = library_bytes(value | wrong)
        with pytest.raises(error):
            check_links([*rows, (2, bad, sha256(bad).digest())])


def test_cut_tail_shows_only_against_a_known_size():
    rows = ledger(6)
    assert check_links(rows[:5]) == (5, rows[4][2].hex())


@given(ENTRIES, st.integers(0, 10**6), st.sampled_from(["", "ab" * 32]))
def test_bytes_put_together_by_hand_are_the_library_s(entry, seq, previous):
    known = "2026-05-04T06:00:00Z"
    body = canonical_bytes(entry.body)
    made = entry_bytes(entry, body, seq=seq, known_at=known, previous=previous)
    assert made == library_bytes(entry_value(entry, seq=seq, known_at=known, previous=previous))
    assert stated_seq(made) == seq
    assert stated_previous(made) == previous
