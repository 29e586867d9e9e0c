"""The calculators outside any review: pool, boundaries. And simulate, for a review's own plan."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

PUBLISHED = json.loads((Path(__file__).parents[1] / "published" / "bcg_colditz_1994.json").read_text())
COLUMNS = ("trial", "intervention_events", "intervention_total", "comparator_events", "comparator_total")


@pytest.fixture
def bcg(tmp_path: Path) -> Path:
    """Write the 13 published BCG trials as the table that `pool` reads."""
    rows = [(name, *counts) for name, _, *counts in PUBLISHED["trials"]]
    file = tmp_path / "bcg.csv"
    file.write_text("\n".join(",".join(map(str, row)) for row in (COLUMNS, *rows)) + "\n")
    return file


def strict_json(text: str) -> Any:
    return json.loads(text, parse_constant=pytest.fail)


def close(found: dict[str, Any], expected: dict[str, float]) -> None:
    for name, value in expected.items():
        assert found[name] == pytest.approx(value, abs=PUBLISHED["tolerance"][name]), name


@pytest.mark.parametrize(("tau2", "expected"), [("dersimonian-laird", "dersimonian_laird"), ("reml", "reml")])
def test_pool_gives_the_published_result(
    run: Callable[..., Any], bcg: Path, tau2: str, expected: str
) -> None:
    ran = run("pool", bcg, "risk-ratio", "--tau2", tau2, "--interval", "wald", "--json")
    assert ran.status == 0
    found = strict_json(ran.out)
    close(found["random"], PUBLISHED["expected"][expected])
    close(found["common"], PUBLISHED["expected"]["common"])


def test_pool_prints_the_same_on_the_ratio_scale_for_people(run: Callable[..., Any], bcg: Path) -> None:
    ran = run("pool", bcg, "risk-ratio")
    assert ran.status == 0
    estimate = PUBLISHED["expected"]["reml"]["estimate"]
    assert f"random effects: {math.exp(estimate):.4g} (" in ran.out
    assert "risk-ratio, 13 trials; intervals at 95%" in ran.out
    assert "Q 152.2 on 12 df" in ran.out


def test_pool_takes_effects_per_1000_people(run: Callable[..., Any], bcg: Path) -> None:
    found = strict_json(run("pool", bcg, "risk-ratio", "--comparator-risk", "0.02", "--json").out)
    (effect,) = found["absolute"]
    ratio = math.exp(found["random"]["estimate"])
    # Closed form: risk difference = comparator risk * (risk ratio - 1).
    assert effect["difference"] == pytest.approx(effect["per"] * 0.02 * (ratio - 1), rel=1e-6)


@pytest.mark.parametrize(
    ("text", "measure", "words"),
    [
        (None, "risk-ratio", "the table can't be read: No such file or directory."),
        ("", "risk-ratio", "the table holds no trial."),
        ("trial,intervention_events\n", "risk-ratio", "the table holds no trial."),
        ("trial,intervention_events\nA,1\n", "risk-ratio", "comparator_total"),
        (",".join(COLUMNS) + "\nA,5,10,3,10\n", "chance-ratio", "chance-ratio"),
        (",".join(COLUMNS) + "\nA,50,10,3,10\n", "risk-ratio", "A"),
    ],
    ids=["no-file", "empty", "no-trial", "columns-missing", "no-such-measure", "events-above-total"],
)
def test_pool_refuses_a_table_it_cannot_use_with_the_reason(
    run: Callable[..., Any], tmp_path: Path, text: str | None, measure: str, words: str
) -> None:
    file = tmp_path / "table.csv"
    if text is not None:
        file.write_text(text)
    ran = run("pool", file, measure)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


def test_a_trial_without_events_is_listed_and_left_out(run: Callable[..., Any], tmp_path: Path) -> None:
    file = tmp_path / "table.csv"
    file.write_text(",".join(COLUMNS) + "\nA,5,100,9,100\nB,4,90,8,95\nNone,0,50,0,50\nNA,7,90,6,95\n")
    ran = run("pool", file, "risk-ratio")
    assert ran.status == 0
    assert "risk-ratio, 3 trials" in ran.out
    assert "  NA: " in ran.out, "a name is a name, whatever it says"
    assert "None: left out, " in ran.out


def test_boundaries_are_the_published_ones(run: Callable[..., Any]) -> None:
    # Five equal looks, two-sided alpha 0.05, the O'Brien-Fleming-type function of Lan and DeMets per tail:
    # 4.877, 3.357, 2.680, 2.290, 2.031, as printed in texts on group-sequential trials (from memory, firm).
    ran = run("boundaries", 0.2, 0.4, 0.6, 0.8, 1)
    assert ran.status == 0
    head, *rows = [line.split("\t") for line in ran.out.splitlines()]
    column = head.index("z")
    assert [row[column] for row in rows[:5]] == ["4.877", "3.357", "2.68", "2.29", "2.031"]
    assert "alpha/2 in each tail" in ran.err
    assert "advise against sequential methods" in ran.err


def test_equal_looks_are_the_same_as_their_fractions(run: Callable[..., Any]) -> None:
    by_number = strict_json(run("boundaries", "--looks", 5, "--json").out)
    by_fraction = strict_json(run("boundaries", 0.2, 0.4, 0.6, 0.8, 1, "--json").out)
    assert [look["z"] for look in by_number["looks"]] == pytest.approx(
        [4.877, 3.357, 2.680, 2.290, 2.031], abs=6e-4
    )
    assert by_number == by_fraction


def test_boundaries_state_the_required_participants(run: Callable[..., Any]) -> None:
    found = strict_json(
        run("boundaries", 1, "--comparator-risk", 0.2, "--relative-reduction", 0.25, "--json").out
    )
    # Closed form: 4 (z(0.975) + z(0.9))^2 p (1 - p) / delta^2 with p the mean of 0.20 and 0.15.
    expected = 4 * (1.959964 + 1.281552) ** 2 * 0.175 * 0.825 / 0.05**2
    assert found["required"]["participants"] == pytest.approx(expected, rel=1e-5)


@pytest.mark.parametrize(
    "arguments",
    [
        (),
        (0.5, 0.4),
        (0.5, 1, "--sides", 3),
        (0.5, 1, "--spending", "none"),
        (0.5, "--looks", 3),
        (0.5, 1, "--power", 2),
    ],
    ids=lambda arguments: " ".join(str(word) for word in arguments) or "nothing",
)
def test_figures_that_are_no_plan_are_refused(run: Callable[..., Any], arguments: tuple[Any, ...]) -> None:
    ran = run("boundaries", *arguments)
    assert (ran.status, ran.out) == (1, "")
    assert "Found: " in ran.err
    assert "Expected: " in ran.err


def test_a_process_prints_data_only_on_stdout_and_no_warning(
    process: Callable[..., Any], tmp_path: Path
) -> None:
    file = tmp_path / "table.csv"
    # One trial without events in one arm, one of them far larger: numbers at which libraries like to warn.
    file.write_text(",".join(COLUMNS) + "\nA,0,100,9,100\nB,4,90,8,95\nC,1,100000,30,100000\n")
    ran = process("pool", file, "odds-ratio", "--json")
    assert (ran.status, ran.err) == (0, "")
    assert strict_json(ran.out)["measure"] == "odds-ratio"


def test_simulate_prints_one_row_for_each_rule_and_keeps_what_it_found(
    run: Callable[..., Any], past: Any
) -> None:
    ran = run("simulate", past.folder, "--reviews", 200, "--seed", 3, "--json")
    assert ran.status in (0, 1), ran.err
    (found,) = strict_json(ran.out)
    assert (found["outcome"], found["reviews"], found["seed"]) == ("failed", 200, 3)
    assert found["exceeds"] == (ran.status == 1)
    assert found["rows"]
    history = run("history", past.folder, "--outcome", "failed", "--json")
    assert any(row["kind"] == "simulation" for row in strict_json(history.out))


def test_simulate_for_people_is_quiet_when_piped(run: Callable[..., Any], past: Any) -> None:
    ran = run("simulate", past.folder, "--reviews", 50)
    assert ran.out.splitlines()[0] == "failed: 50 reviews per row, seed 1"
    assert "\x1b" not in ran.out + ran.err
    assert "advise against sequential methods" in ran.err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--outcome", "none"), "there is no monitored outcome of that name."),
        (("--reviews", "0"), "No review to simulate."),
    ],
)
def test_simulate_refuses_what_cannot_be_simulated(
    run: Callable[..., Any], past: Any, arguments: tuple[str, ...], words: str
) -> None:
    ran = run("simulate", past.folder, *arguments)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


def test_pool_without_a_measure_takes_the_usual_one_and_says_so(
    run: Callable[..., Any], bcg: Path, tmp_path: Path
) -> None:
    named, unnamed = run("pool", bcg, "risk-ratio", "--json"), run("pool", bcg, "--json")
    assert unnamed.status == 0
    found, expected = strict_json(unnamed.out), strict_json(named.out)
    assert found["random"] == expected["random"]
    assert [w for w in found["warnings"] if w not in expected["warnings"]] == [
        "No measure was named; risk-ratio was taken, the usual one for such columns."
    ]
    logs = tmp_path / "logs.csv"
    logs.write_text("trial,log_estimate,standard_error\nA,0.1,0.2\nB,0.2,0.2\n")
    ran = run("pool", logs)
    assert ran.status == 1
    assert "No measure was named and the columns do not tell one" in ran.err
    assert "hazard-ratio" in ran.err
