"""The tables hold the numbers of the analyses, one to one."""

from __future__ import annotations

import csv
import io

import pytest

from treering.report.tables import tables, write_csv


def read(view, name):
    return list(csv.DictReader(io.StringIO(tables(view)[name].decode())))


def test_every_trial_of_every_synthesis_is_a_row_with_its_numbers(view_of):
    view = view_of(3)
    rows = {(r["synthesis"], r["trial"]): r for r in read(view, "trials.csv")}
    for name, body in view.analyses.items():
        for trial in body["trials"]:
            row = rows.pop((name, trial["trial"]))
            assert row["in_main"] == ("yes" if trial["in_main"] else "no")
            assert row["estimate"] == ("" if trial["estimate"] is None else repr(trial["estimate"]))
            assert row["intervention_total"] == str(trial["values"]["intervention_total"])
    assert rows == {}


def test_the_looks_can_be_computed_again_from_the_table(view_of):
    view = view_of(3)
    looks = [look for b in view.analyses.values() for look in (b["monitoring"] or {"looks": []})["looks"]]
    rows = read(view, "looks.csv")
    assert [float(r["fraction"]) for r in rows] == [look["fraction"] for look in looks]
    assert [r["verdict"] for r in rows] == [look["verdict"] for look in looks]


def test_planned_and_common_effect_stand_beside_each_other(view_of):
    rows = read(view_of(2), "syntheses.csv")
    assert [r["analysis"] for r in rows[:2]] == ["planned", "common effect"]


def test_changes_carry_their_cause(view_of):
    rows = read(view_of(3), "changes.csv")
    assert {r["cause"] for r in rows} == {"correction", "retraction"}
    moved = [float(r["movement"]) for r in rows if r["what"] == "movement" and r["synthesis"] == "skin-burns"]
    assert moved == [pytest.approx(view_of(3).changes["skin-burns"]["movement"])]


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@x", "\tx"])
def test_text_that_a_spreadsheet_would_run_is_defused(text):
    assert write_csv(["a"], [[text]]).decode().splitlines()[1].strip('"').startswith("'")


def test_a_negative_number_stays_a_number():
    assert write_csv(["a"], [[-1.5]]) == b"a\n-1.5\n"
