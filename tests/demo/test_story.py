"""The invented demo review plays the story that it tells, through the real steps."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path
from typing import Any

import pytest

from treering.demo import lay_out, play
from treering.errors import TreeringError
from treering.update import RunContext, Summary, read_review, run_update


@pytest.fixture(scope="module")
def story(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    folder = tmp_path_factory.mktemp("demo") / "review"
    lay_out(folder)
    weeks: list[tuple[str, Summary]] = []

    def run(place: Path, moment: datetime) -> Summary:
        return run_update(RunContext(read_review(place), moment, "test"))

    play(folder, run, lambda week, summary: weeks.append((week.day, summary)))
    return {"folder": folder, "weeks": weeks}


def test_seven_weeks_make_six_versions_and_one_quiet_week(story: dict[str, Any]) -> None:
    assert [summary.version for _, summary in story["weeks"]] == [1, None, 2, 3, 4, 5, 6]


def test_no_file_goes_back_and_nothing_waits(story: dict[str, Any]) -> None:
    for _, summary in story["weeks"]:
        assert (summary.returned, summary.waiting, summary.undelivered, summary.remarks) == ((), (), (), ())


def test_the_main_outcome_crosses_loses_the_crossing_and_crosses_again(story: dict[str, Any]) -> None:
    verdicts = [summary.verdicts["failed-first-attempt"] for _, summary in story["weeks"]]
    assert verdicts == [
        "accruing",
        "accruing",
        "accruing",
        "accruing",
        "benefit boundary crossed",
        "crossing no longer supported",
        "benefit boundary crossed",
    ]


def test_whoever_is_told_of_the_crossing_is_told_that_it_is_lost(story: dict[str, Any]) -> None:
    told = {
        day: sorted(i["person"] for i in summary.told if i["synthesis"] == "failed-first-attempt")
        for day, summary in story["weeks"]
    }
    assert told["2026-02-02"] == ["chair", "maker", "nurse", "patient"]
    assert told["2026-02-09"] == told["2026-02-02"]


def test_the_correction_changes_one_number(story: dict[str, Any]) -> None:
    with (story["folder"] / "reports" / "2026-01-26-v003" / "changes.csv").open() as file:
        changed = [line for line in file if "trials changed" in line and "comparator_events" in line]
    assert len(changed) == 1
    assert "Cedar" in changed[0]


def test_every_page_says_that_it_is_invented_and_no_recommendation(story: dict[str, Any]) -> None:
    pages = sorted(story["folder"].glob("reports/**/index.html"))
    assert len(pages) == 7
    for page in pages:
        text = page.read_text()
        assert "Invented" in text
        assert "no treatment recommendation" in text
        assert "licensed clinicians" in text


def test_the_demo_never_touches_a_folder_that_holds_something(tmp_path: Path) -> None:
    (tmp_path / "mine.txt").write_text("x")
    with pytest.raises(TreeringError, match="not empty"):
        lay_out(tmp_path)
