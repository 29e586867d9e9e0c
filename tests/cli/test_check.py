"""`check` says what an update would do, and writes nothing at all."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any


def mixed_intake(review: Any) -> None:
    """Drop a verified pair, a lone reading, and two files with faults."""
    review.drop_pair("T1", (24, 110, 33, 108))
    review.drop("lone.json", review.extraction("T2", "AA", (30, 140, 41, 138)))
    review.drop("above.json", review.extraction("T3", "AA", (130, 110, 33, 108)))
    review.drop("broken.json", "{")


def test_an_empty_intake_is_done_and_silent_on_stderr(run: Callable[..., Any], review: Any) -> None:
    ran = run("check", review.folder)
    assert (ran.status, ran.err) == (0, "")
    assert ran.out.splitlines() == [
        "0 files in intake, none would go back.",
        "An update would lay down no version.",
    ]


def test_it_names_what_is_verified_what_waits_and_what_goes_back(
    run: Callable[..., Any], review: Any
) -> None:
    mixed_intake(review)
    ran = run("check", review.folder)
    assert ran.status == 1, "files that would go back are a reason to look"
    assert "5 files in intake, 2 would go back." in ran.out
    assert "verified: T1, failed" in ran.out
    assert "waits: T2, failed: " in ran.out
    assert "above.json" in ran.out
    assert "broken.json" in ran.out
    assert "An update would lay down a new version." in ran.out


def test_it_writes_nothing_before_the_first_update(
    run: Callable[..., Any], review: Any, digests: Callable[..., Any]
) -> None:
    mixed_intake(review)
    before = digests(review.folder)
    run("check", review.folder)
    assert digests(review.folder) == before


def test_it_writes_nothing_beside_a_store(
    run: Callable[..., Any], review: Any, digests: Callable[..., Any]
) -> None:
    review.drop_pair("T0", (20, 100, 30, 100))
    review.update("2026-01-05")
    mixed_intake(review)
    before = digests(review.folder)
    assert any("evidence.sqlite" in name for name in before)
    run("check", review.folder)
    assert digests(review.folder) == before


def test_json_holds_the_same_for_machines(run: Callable[..., Any], review: Any) -> None:
    mixed_intake(review)
    found = json.loads(run("check", review.folder, "--json").out)
    assert [item["file"] for item in found["returned"]] == ["above.json", "broken.json"]
    assert found["verified"] == [{"trial": "T1", "outcome": "failed"}]
    assert [item["trial"] for item in found["waiting"]] == ["T2"]
    assert found["new_version"] is True


def test_it_foretells_what_the_update_does(run: Callable[..., Any], review: Any) -> None:
    mixed_intake(review)
    foretold = json.loads(run("check", review.folder, "--json").out)
    summary = review.update("2026-01-05")
    assert list(summary.returned) == foretold["returned"]
    assert [item["trial"] for item in summary.waiting] == [item["trial"] for item in foretold["waiting"]]
    assert (summary.version is not None) == foretold["new_version"]


def test_a_changed_plan_without_amendment_is_told_before_the_update(
    run: Callable[..., Any], review: Any
) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    review.update("2026-01-05")
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan.replace("diversity = 0.25", "diversity = 0.4"))
    ran = run("check", review.folder)
    assert (ran.status, ran.out) == (1, "")
    assert "amendment" in ran.err
