"""Commands that look at the past of a review: history, compare, replay, notices."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from typing import Any

import pytest


def rows_of(text: str) -> list[dict[str, str]]:
    """Read a piped table: tab-separated, one head."""
    head, *rows = [line.split("\t") for line in text.splitlines()]
    return [dict(zip(head, row, strict=True)) for row in rows]


def test_history_lists_one_row_for_each_version(run: Callable[..., Any], past: Any) -> None:
    ran = run("history", past.folder)
    assert (ran.status, ran.err) == (0, "")
    rows = rows_of(ran.out)
    assert [(row["version"], row["date"]) for row in rows] == [("1", "2026-01-05"), ("2", "2026-01-19")]
    assert rows[1]["verdicts"] == "failed: benefit boundary crossed"
    assert [row["head"] for row in rows] == [past.report(n)["store_head"]["root"] for n in (1, 2)]


@pytest.mark.parametrize(
    ("filters", "fits"),
    [
        (("--trial", "T1"), lambda row: "T1" in row["key"]),
        (("--person", "BB"), lambda row: row["by"] == "BB" or row["what"] == "verification"),
        (("--outcome", "failed"), lambda row: "failed" in row["key"]),
        (("--since", "2026-01-06"), lambda row: row["known"][:10] in ("2026-01-12", "2026-01-19")),
        (("--until", "2026-01-05"), lambda row: row["known"][:10] == "2026-01-05"),
        (("--trial", "T1", "--since", "2026-01-06"), lambda row: False),
    ],
    ids=lambda value: " ".join(value) if isinstance(value, tuple) else "",
)
def test_history_filters_entries(
    run: Callable[..., Any], past: Any, filters: tuple[str, ...], fits: Callable[[dict[str, str]], bool]
) -> None:
    ran = run("history", past.folder, *filters)
    assert ran.status == 0
    rows = rows_of(ran.out)
    assert all(fits(row) for row in rows)
    assert bool(rows) == (ran.err == "")
    if not rows:
        assert ran.err == "Nothing in the store fits.\n"


def test_a_filter_leaves_out_nothing_that_fits(run: Callable[..., Any], past: Any) -> None:
    everything = rows_of(run("history", past.folder, "--since", "2000-01-01").out)
    split = [rows_of(run("history", past.folder, side, day).out) for side, day in
             (("--until", "2026-01-12"), ("--since", "2026-01-13"))]  # fmt: skip
    assert everything == split[0] + split[1]
    assert [int(row["entry"]) for row in everything] == sorted(int(row["entry"]) for row in everything)


def test_compare_says_what_moved_and_why(run: Callable[..., Any], past: Any) -> None:
    ran = run("compare", 1, 2, past.folder)
    assert (ran.status, ran.err) == (0, "")
    assert ran.out.splitlines()[0] == "version 1 of 2026-01-05 to version 2 of 2026-01-19"
    assert "verdict: accruing to benefit boundary crossed" in ran.out
    assert "new trial: " in ran.out


def test_compare_as_json_splits_the_movement(run: Callable[..., Any], past: Any) -> None:
    found = json.loads(run("compare", 1, 2, past.folder, "--json").out)
    before, after = (past.report(n)["syntheses"][0]["pooled"]["estimate"] for n in (1, 2))
    parts = found["syntheses"]["failed"]["split"]
    assert sum(part["movement"] for part in parts) == pytest.approx(after - before, abs=1e-9)
    assert found["protocol_changed"] is False


@pytest.mark.parametrize(
    ("pair", "words"), [((2, 1), "name the older version first"), ((1, 9), "there is no such version")]
)
def test_compare_refuses_versions_that_are_not_there_or_out_of_order(
    run: Callable[..., Any], past: Any, pair: tuple[int, int], words: str
) -> None:
    ran = run("compare", *pair, past.folder)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


def test_replay_of_every_version_has_the_same_bytes(run: Callable[..., Any], past: Any) -> None:
    ran = run("replay", "all", past.folder)
    assert ran.status == 0, ran.out
    lines = ran.out.splitlines()
    assert [line.split(":")[0] for line in lines] == ["version 1", "version 2"]
    assert all("same numbers" in line for line in lines)


@pytest.fixture
def touched_page(past: Any) -> Iterator[None]:
    """Change a released page on disk, and put it back afterwards."""
    (page,) = past.folder.glob("reports/*-v002/index.html")
    text = page.read_text()
    page.write_text(text + "<!-- later -->")
    yield
    page.write_text(text)


@pytest.mark.usefixtures("touched_page")
def test_replay_names_the_file_that_someone_changed(run: Callable[..., Any], past: Any) -> None:
    ran = run("replay", "2", past.folder)
    assert ran.status == 1
    assert "version 2: differs" in ran.out
    assert "2026-01-19-v002/index.html: changed on disk" in ran.out


@pytest.mark.parametrize(
    ("version", "words"), [("9", "there is no such version"), ("last", "that is no version")]
)
def test_replay_refuses_a_version_that_is_none(
    run: Callable[..., Any], past: Any, version: str, words: str
) -> None:
    ran = run("replay", version, past.folder)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


def test_notices_list_each_person_once_for_the_crossing(run: Callable[..., Any], past: Any) -> None:
    ran = run("notices", past.folder)
    assert (ran.status, ran.err) == (0, "")
    rows = rows_of(ran.out)
    assert [(row["event"], row["person"]) for row in rows] == [
        ("boundary crossed", "chair"),
        ("boundary crossed", "second"),
    ]
    assert all(row["delivered"].startswith("2026-01-19") and row["acknowledged"] == "-" for row in rows)


def test_a_review_that_told_nobody_says_so(run: Callable[..., Any], review: Any) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    review.update("2026-01-05")
    ran = run("notices", review.folder)
    assert ran.status == 0
    assert rows_of(ran.out) == []
    assert ran.err == "No notices.\n"


@pytest.mark.parametrize(
    "command",
    [
        ("history",),
        ("history", "--trial", "T1"),
        ("compare", 1, 2),
        ("replay", "1"),
        ("notices", "--waiting"),
    ],
    ids=lambda command: " ".join(str(word) for word in command),
)
def test_json_parses_and_has_no_word_that_json_lacks(
    run: Callable[..., Any], past: Any, command: tuple[Any, ...]
) -> None:
    ran = run(command[0], *command[1:], past.folder, "--json")
    assert (ran.status, ran.err) == (0, "")
    assert json.loads(ran.out, parse_constant=pytest.fail)


def test_looking_at_the_past_changes_nothing(
    run: Callable[..., Any], past: Any, digests: Callable[..., Any]
) -> None:
    before = digests(past.folder)
    for command in (("history",), ("compare", 1, 2), ("replay", "2"), ("notices",)):
        run(command[0], *command[1:], past.folder)
    assert digests(past.folder) == before
