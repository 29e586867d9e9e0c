"""Proofs as files hold without the database, and nothing that was changed in them does."""

from __future__ import annotations

import copy
import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering import store
from treering.errors import ProofError, StoreError
from treering.store.proofs import (
    consistency_document,
    inclusion_document,
    read_document,
    verify_consistency,
    verify_inclusion,
)


@pytest.fixture(scope="module")
def documents(filled):
    """An inclusion and a consistency proof from a store with a few hundred entries."""
    with store.open_store(filled) as opened:
        head = opened.head()
        yield inclusion_document(opened, 41, head.size), consistency_document(opened, 200), head


def test_inclusion_proof_gives_entry_and_head(documents):
    document, _, head = documents
    shown = verify_inclusion(read_document(json.dumps(document).encode()))
    assert shown.head == head
    assert shown.entry["seq"] == 41
    assert shown.entry["body"] == {"trial": shown.entry["key"].removeprefix("study/")}


def test_consistency_proof_gives_both_heads(documents):
    _, document, head = documents
    shown = verify_consistency(read_document(json.dumps(document).encode()))
    assert (shown.first.size, shown.second) == (200, head)


def test_every_entry_of_every_tree_is_proved(evidence, study, moment):
    evidence.append([study(f"T{n}") for n in range(9)], known_at=moment)
    heads = {size: evidence.head(size) for size in range(1, 10)}
    for size, head in heads.items():
        for seq in range(size):
            assert verify_inclusion(inclusion_document(evidence, seq, size)).head == head
        for first in range(1, size + 1):
            assert verify_consistency(consistency_document(evidence, first, size)).first == heads[first]


@given(data=st.data())
def test_no_changed_byte_of_an_inclusion_proof_passes(documents, data):
    text = json.dumps(documents[0]).encode()
    place = data.draw(st.integers(0, len(text) - 1))
    other = data.draw(st.integers(0, 255).filter(lambda byte: byte != text[place]))
    changed = text[:place] + bytes([other]) + text[place + 1 :]
    try:
        shown = verify_inclusion(read_document(changed))
    except ProofError:
        return
    # The name of the review is no part of the tree; letters of a hash may be large or small.
    honest = verify_inclusion(documents[0])
    assert (shown.entry, shown.head) == (honest.entry, honest.head)


@pytest.mark.parametrize(
    ("place", "value"),
    [
        (("size",), 250),
        (("seq",), 40),
        (("root",), "00" * 32),
        (("root",), "zz"),
        (("path", 0), "00" * 32),
        (("path",), []),
        (("path",), "no list"),
        (("entry",), '{"seq":41}'),
        (("entry",), "\ud800"),
        (("seq",), True),
        (("seq",), -1),
    ],
)
def test_changed_inclusion_proof_is_refused(documents, place, value):
    changed = copy.deepcopy(documents[0])
    holder = changed
    for step in place[:-1]:
        holder = holder[step]
    holder[place[-1]] = value
    with pytest.raises(ProofError):
        verify_inclusion(changed)


@pytest.mark.parametrize("part", ["first", "second"])
@pytest.mark.parametrize(("name", "value"), [("size", 199), ("root", "11" * 32)])
def test_changed_consistency_proof_is_refused(documents, part, name, value):
    changed = copy.deepcopy(documents[1])
    changed[part][name] = value
    with pytest.raises(ProofError):
        verify_consistency(changed)


@pytest.mark.parametrize("data", [b"", b"\xff", b"[]", b"{}", b'{"format":"other"}', b"[" * 100_000])
def test_other_files_are_no_proofs(data):
    with pytest.raises(ProofError, match="no proof"):
        read_document(data)


def test_entry_outside_the_tree_has_no_proof(documents, filled):
    with store.open_store(filled) as opened, pytest.raises(StoreError):
        inclusion_document(opened, 41, 41)
