"""Hard cases of design: trials with many arms, cluster trials, rare harms, subgroups (H6, H7, H9, H10).

All trials are invented; figures from outside stand beside the check.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from treering.synthesis.arms import arms_body, without_double_counting
from treering.synthesis.trials import TrialArm, TrialRow

THREE_ARMS = (
    {"arm": "high", "label": "warm 40", "side": "intervention", "randomised": 60},
    {"arm": "low", "label": "warm 36", "side": "intervention", "randomised": 62},
    {"arm": "none", "label": "no warming", "side": "comparator", "randomised": 61},
)
BURNS = """
[[outcomes]]
id = "burns"
title = "Skin burns"
question = "More burns?"
measure = "peto-odds-ratio"
role = "harm"
better = "lower"
minimally_important = 2.0
[outcomes.pooling]
model = "common"
interval = "wald"
[outcomes.monitoring]
effect = 2.0
effect_reason = "invented"
sides = 1
spending = "pocock"
diversity_reason = "common effect"
"""


def drop_counts(review: Any, trial: str, counts: tuple[int, int, int, int], **result: Any) -> None:
    """Drop two people's equal readings with further fields of the result."""
    fields = {name: result.pop(name) for name in ("arms", "design", "registration") if name in result}
    for person in ("AA", "BB"):
        record = review.extraction(trial, person, counts, **fields)
        record["results"][0] |= result
        review.drop(f"{trial}-{person}.json", record)


def test_h6_joined_arms_are_proved_to_count_nobody_twice(base: Any, week: Callable[..., Any]) -> None:
    drop_counts(base, "Three", (20, 122, 15, 61), arms=THREE_ARMS)
    found = week(base, "2026-01-12").failed["arms"]
    assert found["passed"]
    assert found["checked"] == 1
    assert found["uses"] == [
        {"trial": "Three", "arm": "no warming", "used": 61, "randomised": 61, "unused": 0},
        {"trial": "Three", "arm": "warm 40 + warm 36", "used": 122, "randomised": 122, "unused": 0},
    ]
    assert [item["trial"] for item in found["not_checked"]] == ["T1", "T2", "T3"]


def test_h6_a_side_that_counts_more_than_its_arms_have_goes_back(base: Any, week: Callable[..., Any]) -> None:
    drop_counts(base, "Three", (20, 122, 15, 90), arms=THREE_ARMS)  # the control arm of 61 was used for two
    after = week(base, "2026-01-12")
    assert after.version is None
    assert len(after.returned) == 2
    assert "90 people analysed, but the comparator side randomised 61" in after.returned[0]["faults"][0]


@pytest.mark.parametrize("shared", ["report", "registration"])
def test_h6_two_contrasts_of_one_trial_as_two_trials_go_back(
    base: Any, week: Callable[..., Any], shared: str
) -> None:
    for trial, counts in (("Three-high", (9, 60, 15, 61)), ("Three-low", (11, 62, 15, 61))):
        for person in ("AA", "BB"):
            fields: dict[str, Any] = {
                "report": {"id": "Three-main" if shared == "report" else f"{trial}-main"}
            }
            fields |= {"registration": "INV-3"} if shared == "registration" else {}
            base.drop(f"{trial}-{person}.json", base.extraction(trial, person, counts, **fields))
    after = week(base, "2026-01-12")
    assert (after.version, len(after.returned)) == (None, 4)
    sentence = "is said to belong to trial" if shared == "report" else "one trial counts once"
    assert all(any(sentence in fault for fault in item["faults"]) for item in after.returned)


def test_h6_what_reached_the_store_otherwise_is_left_out_with_the_reason() -> None:
    one = TrialRow(
        "A-high", "A high", "2025-01-01", "A-1", {"intervention_total": 60, "comparator_total": 61}
    )
    two = TrialRow("A-low", "A low", "2025-01-01", "A-1", {"intervention_total": 62, "comparator_total": 61})
    big = TrialRow(
        "B",
        "B",
        "2025-01-01",
        "B-1",
        {"intervention_total": 122, "comparator_total": 122},
        arms=(TrialArm("warm", "intervention", 122), TrialArm("none", "comparator", 61)),
    )
    rows = without_double_counting([one, two, big])
    assert [row.left_out is None for row in rows] == [True, False, False]
    assert "join the arms" in str(rows[1].left_out)
    assert "122 people are counted of 61 randomised (none)" in str(rows[2].left_out)
    found = arms_body(rows, "failed")
    assert (found["passed"], [item["trial"] for item in found["refused"]]) == (False, ["A-low", "B"])


def test_h7_effective_numbers_are_analysed_and_raw_ones_printed(base: Any, week: Callable[..., Any]) -> None:
    # closed form, 1200 / (1 + 29 * 0.02): 1200 people in clusters of 30 with ICC 0.02 count as 759
    raw = (180, 600, 210, 600)
    drop_counts(base, "Wards", raw, design="cluster", clusters=40, mean_cluster_size=30, icc=0.02)
    after = week(base, "2026-01-12")
    row = after.trial("Wards")
    assert [row["values"][name] for name in ("intervention_events", "comparator_total")] == [180, 600]
    assert (row["intervention_total"], row["design_effect"]) == (600, 1.58)
    assert row["flags"] == ["cluster trial, design effect 1.58: 1200 people count as 759"]
    # closed form: the same log risk ratio, with 1.58 times the variance of the raw counts
    variance = 1 / 180 - 1 / 600 + 1 / 210 - 1 / 600
    assert row["estimate"] == pytest.approx(np.log(180 / 210), rel=1e-9)
    assert row["standard_error"] ** 2 == pytest.approx(1.58 * variance, rel=1e-9)
    others = 110 + 108 + 140 + 138 + 80 + 82
    assert after.failed["participants"] == others + 1200
    assert after.failed["effective_participants"] == pytest.approx(others + 1200 / 1.58)
    information = sum(1 / r["standard_error"] ** 2 for r in after.failed["trials"])
    assert after.failed["monitoring"]["look"]["information"] == pytest.approx(information, rel=1e-8)


def test_h7_a_cluster_trial_without_its_correlation_is_taken_as_reported_and_flagged(
    base: Any, week: Callable[..., Any]
) -> None:
    drop_counts(base, "Wards", (180, 600, 210, 600), design="cluster", mean_cluster_size=30)
    drop_counts(base, "Other", (30, 200, 40, 200), design="cluster", mean_cluster_size=20, icc=0.05)
    after = week(base, "2026-01-12")
    (flag,) = after.trial("Wards")["flags"]
    assert flag.startswith("cluster trial, taken as reported")
    assert after.trial("Other")["design_effect"] == pytest.approx(1.95)


def test_h7_effective_numbers_reach_mantel_haenszel_pooling_and_the_split_of_changes(
    review: Any, week: Callable[..., Any]
) -> None:
    plan = (review.folder / "config" / "review.toml").read_text().split("[outcomes.monitoring]")[0]
    review.write_plan(plan + '[outcomes.pooling]\nmethod = "mantel-haenszel"\n')
    review.drop_pair("T1", (24, 110, 33, 108))
    week(review, "2026-01-05")
    drop_counts(review, "Wards", (180, 600, 210, 600), design="cluster", mean_cluster_size=30, icc=0.02)
    after = week(review, "2026-01-12")
    assert after.changes["failed"]["uncaused"] == []
    # closed form (Mantel and Haenszel 1959), the counts of the cluster trial divided by 1.58
    top = 24 * 108 / 218 + 180 * 600 / 1200 / 1.58
    bottom = 33 * 110 / 218 + 210 * 600 / 1200 / 1.58
    assert after.failed["pooled"]["estimate"] == pytest.approx(np.log(top / bottom), rel=1e-9)


def test_a_crossover_trial_with_figures_for_each_side_is_flagged(base: Any, week: Callable[..., Any]) -> None:
    drop_counts(base, "Swap", (10, 40, 14, 40), design="crossover")
    assert week(base, "2026-01-12").trial("Swap")["flags"] == [
        "crossover trial, analysed side against side: right for the first period only"
    ]


@pytest.mark.parametrize(
    ("figures", "sentence"),
    [
        ({"icc": -0.1, "mean_cluster_size": 30}, "this must be from 0 to 1 (found -0.1)"),
        ({"icc": 0.02}, "only with mean_cluster_size beside it"),
    ],
)
def test_h7_cluster_figures_that_cannot_be_used_go_back(
    base: Any, week: Callable[..., Any], figures: dict[str, float], sentence: str
) -> None:
    drop_counts(base, "Wards", (180, 600, 210, 600), **figures)
    assert sentence in week(base, "2026-01-12").returned[0]["faults"][0]


def test_h9_double_zero_trials_stay_listed_and_out_without_any_half_events(
    base: Any, week: Callable[..., Any]
) -> None:
    amendment = """
[[amendments]]
date = 2026-01-06
author = "DD"
clauses = ["outcomes.burns"]
reason = "burns are watched too"
results_seen = true
"""
    plan = (base.folder / "config" / "review.toml").read_text()
    base.write_plan(plan + BURNS + amendment)
    for trial, counts in (("B1", (3, 400, 0, 400)), ("B2", (0, 90, 0, 88)), ("B3", (2, 250, 1, 251))):
        drop_counts(base, trial, counts, outcome="burns")
    burns = week(base, "2026-01-12").syntheses["burns"]
    rows = {row["trial"]: row for row in burns["trials"]}
    assert rows["B2"]["left_out"] == "no event in either arm: says nothing about a relative effect"
    assert (rows["B2"]["in_main"], rows["B2"]["status"], burns["k"]) == (False, "included", 2)
    # closed form (Yusuf and others 1985): O - E and its hypergeometric variance, no correction anywhere
    expected, variance = 3 * 400 / 800, 400 * 400 * 3 * 797 / (800**2 * 799)
    assert rows["B1"]["estimate"] == pytest.approx((3 - expected) / variance, rel=1e-9)
    assert rows["B1"]["standard_error"] == pytest.approx(variance**-0.5, rel=1e-9)
    look = burns["monitoring"]["look"]
    assert look["trials"] == sorted(["B1", "B3"])
    assert look["information"] == pytest.approx(
        sum(rows[name]["standard_error"] ** -2 for name in ("B1", "B3")), rel=1e-8
    )
    assert burns["monitoring"]["plan"]["futility"] is False
    assert look["futility"] is None


def test_h10_a_subgroup_never_raises_an_alarm(review: Any, week: Callable[..., Any]) -> None:
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan.replace("comparator_risk = 0.3", 'comparator_risk = 0.3\nsubgroups = ["setting"]'))
    for number in range(3):
        for level, counts in (("ward", (40 + number, 300, 95, 300)), ("clinic", (95, 300, 41 + number, 300))):
            review.drop_pair(f"{level}-{number}", counts, subgroups={"setting": level})
    after = week(review, "2026-01-05")
    (block,) = after.failed["subgroups"]
    ward = next(level for level in block["levels"] if level["level"] == "ward")
    assert ward["ci_high"] < 0, "the subgroup alone is far from no effect"
    assert block["p"] < 0.001
    assert (after.verdict, after.told) == ("required information reached without a crossing", [])


def test_a_correction_of_another_size_reaches_mantel_haenszel_pooling(
    review: Any, week: Callable[..., Any]
) -> None:
    plan = (review.folder / "config" / "review.toml").read_text().split("[outcomes.monitoring]")[0]
    pooling = '[outcomes.pooling]\nmethod = "mantel-haenszel"\ncorrection = "constant"\n'
    review.write_plan(plan + pooling + "correction_amount = 0.1\n")
    counts = {"Zero": (0, 50, 4, 50), "Two": (6, 80, 9, 80)}
    for trial, numbers in counts.items():
        review.drop_pair(trial, numbers)
    found = week(review, "2026-01-05").failed["pooled"]["estimate"]

    def arm(events: int, total: int, add: float) -> tuple[float, float]:
        return events + add, total + 2 * add

    # closed form of the Mantel-Haenszel risk ratio (Mantel and Haenszel 1959): sum(a n2/N) / sum(c n1/N)
    top = bottom = 0.0
    for a, n1, c, n2 in counts.values():
        add = 0.1 if a == 0 else 0.0
        (a1, m1), (c1, m2) = arm(a, n1, add), arm(c, n2, add)
        top, bottom = top + a1 * m2 / (m1 + m2), bottom + c1 * m1 / (m1 + m2)
    assert found == pytest.approx(np.log(top / bottom), rel=1e-9)
