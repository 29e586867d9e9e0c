"""The 13 BCG trials through intake, store, pooling, ledger and report, one update per year of report."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

PUBLISHED = json.loads((Path(__file__).parents[1] / "published" / "bcg_colditz_1994.json").read_text())


@pytest.fixture(scope="module")
def bcg(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> Any:
    """Return the review after the trials arrived in date order as separate updates."""
    review = review_class(tmp_path_factory.mktemp("bcg") / "review")
    trials = sorted(PUBLISHED["trials"], key=lambda row: (row[1], row[0]))
    for week, year in enumerate(sorted({row[1] for row in trials})):
        for name, published, *counts in trials:
            if published == year:
                review.drop_pair(name, tuple(counts), published=str(year))
        review.update(f"2026-{1 + week // 4:02d}-{1 + 7 * (week % 4):02d}")
    return review


def close(found: dict[str, Any], expected: dict[str, float]) -> None:
    for name, value in expected.items():
        assert found[name] == pytest.approx(value, abs=PUBLISHED["tolerance"][name]), name


def last_report(review: Any) -> dict[str, Any]:
    (synthesis,) = review.report(12)["syntheses"]
    return synthesis


def test_common_effect_matches_the_published_one(bcg: Any) -> None:
    close(last_report(bcg)["common"], PUBLISHED["expected"]["common"])


def test_dersimonian_laird_matches_the_published_one(bcg: Any) -> None:
    named = {other["name"]: other for other in last_report(bcg)["others"]}
    close(named["DerSimonian-Laird, Wald interval"], PUBLISHED["expected"]["dersimonian_laird"])


def test_reml_matches_the_published_one(bcg: Any) -> None:
    named = {other["name"]: other for other in last_report(bcg)["others"]}
    close(named["REML, Wald interval"], PUBLISHED["expected"]["reml"])
    assert last_report(bcg)["pooled"]["estimate"] == pytest.approx(-0.7145, abs=6e-5)


def test_each_update_left_one_look_in_the_ledger(bcg: Any) -> None:
    looks = last_report(bcg)["monitoring"]["looks"]
    assert [look["number"] for look in looks] == list(range(1, 13))
    assert [look["version"] for look in looks] == list(range(1, 13))
    spent = [look["alpha_spent"] for look in looks]
    assert spent == sorted(spent)
    assert spent[-1] <= 0.05


def test_participants_are_those_of_the_thirteen_trials(bcg: Any) -> None:
    assert last_report(bcg)["k"] == 13
    assert last_report(bcg)["participants"] == sum(row[3] + row[5] for row in PUBLISHED["trials"])


def test_readers_can_be_any_two_and_in_any_order(make_review: Callable[..., Any]) -> None:
    first, second = make_review(name="one"), make_review(name="two")
    counts = (4, 123, 11, 139)
    for review, names in ((first, ("x.json", "y.json")), (second, ("z.json", "a.json"))):
        for name, person in zip(names, ("AA", "BB"), strict=True):
            review.drop(name, review.extraction("Aronson", person, counts))
        review.update("2026-01-05")
    reports = [r.report(1) for r in (first, second)]
    assert reports[0]["syntheses"] == reports[1]["syntheses"]
