"""A stored version computed again: same bytes, and what differs is named."""

from __future__ import annotations

from typing import Any

import pytest

from treering.errors import StoreError
from treering.update import read_review
from treering.update.replaying import differing, replay


@pytest.fixture(scope="module")
def lived(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> Any:
    """Return a review with a base version, a crossing and a retraction."""
    review = review_class(tmp_path_factory.mktemp("lived") / "review")
    for trial, counts in (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138)), ("T3", (15, 80, 21, 82))):
        review.drop_pair(trial, counts)
    review.update("2026-01-05")
    review.drop_pair("Large", (150, 800, 230, 800))
    review.update("2026-01-12")
    notice = {
        "record": "integrity notice",
        "trial": "Large",
        "notice": "retraction",
        "date": "2026-01-17",
        "reason": "retracted by the journal",
        "seen_by": "DD",
    }
    review.drop("gone.json", notice)
    review.update("2026-01-19")
    return review


@pytest.mark.parametrize("version", [1, 2, 3])
def test_a_version_computed_again_has_the_same_bytes(lived: Any, version: int) -> None:
    with lived.store() as store:
        again = replay(store, read_review(lived.folder), version)
    assert again.differences == ()
    assert {file["state"] for file in again.files} == {"same bytes"}
    assert "report.json" in {file["file"].split("/")[-1] for file in again.files}


def test_a_page_changed_on_disk_is_named(lived: Any) -> None:
    (page,) = lived.folder.glob("reports/*-v002/index.html")
    original = page.read_bytes()
    page.write_bytes(original + b" ")
    try:
        with lived.store() as store:
            again = replay(store, read_review(lived.folder), 2)
    finally:
        page.write_bytes(original)
    assert not again.holds
    assert [f["file"].split("/")[-1] for f in again.files if f["state"] != "same bytes"] == ["index.html"]


def test_an_unknown_version_is_refused(lived: Any) -> None:
    with lived.store() as store, pytest.raises(StoreError, match="no such version"):
        replay(store, read_review(lived.folder), 9)


def test_differences_are_listed_number_by_number() -> None:
    then = {"a": 1.0, "b": [1, 2], "c": {"d": "x"}, "e": 2.0}
    now = {"a": 1.0 + 1e-12, "b": [1, 3], "c": {"d": "y"}, "e": 2.0}
    assert list(differing(then, now)) == [
        {"place": "b[1]", "then": 2, "now": 3},
        {"place": "c.d", "then": "x", "now": "y"},
    ]
