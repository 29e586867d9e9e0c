"""Figures are well-formed, say in words what they show, and are the same bytes every time."""

from __future__ import annotations

import os
import re
import subprocess
import sys
import xml.etree.ElementTree as ET

import pytest

from treering.report.figures import effect_figure, forest_figure, z_figure
from treering.report.figures.monitoring_effect import verdict_marker
from treering.report.figures.style import at_most, ticks
from treering.report.render import figures
from treering.terms import Verdict

SVG = "{http://www.w3.org/2000/svg}"
MAIN = "failed-first-attempt"


def texts(svg):
    return [(node.text or "") for node in ET.fromstring(svg).iter(f"{SVG}text")]


@pytest.fixture(scope="module")
def drawn(views):
    return figures(views[3])


def test_each_synthesis_has_a_forest_and_each_monitored_one_both_monitoring_figures(drawn):
    assert sorted(drawn) == sorted(
        [f"forest-{o}" for o in (MAIN, "pain", "minutes-to-working-line", "skin-burns")]
        + [f"{kind}-{o}" for kind in ("effect", "z") for o in (MAIN, "pain", "skin-burns")]
    )


def test_every_figure_is_well_formed_and_named_for_those_who_cannot_see_it(drawn):
    for name, svg in drawn.items():
        root = ET.fromstring(svg)
        assert root.get("role") == "img"
        title, desc = root.find(f"{SVG}title"), root.find(f"{SVG}desc")
        assert (
            root.get("aria-labelledby")
            == f"{title.get('id')} {desc.get('id')}"
            == f"{name}-title {name}-desc"
        )
        assert title.text
        assert desc.text


def test_figures_carry_no_date_no_style_for_the_whole_page_and_no_script(drawn):
    for svg in drawn.values():
        assert not re.search(r"<metadata|<style|<script|<!DOCTYPE|dc:date", svg)


def test_figures_drawn_twice_are_the_same_bytes(views, drawn):
    assert figures(views[3]) == drawn


def test_figures_do_not_depend_on_the_run():
    code = (
        "import hashlib; from treering.report.figures import z_figure;"
        "look = dict(number=1, fraction=0.4, z=-1.5, boundary=3.3, spends=True, redrawn_boundary=None,"
        " verdict='accruing');"
        "body = dict(title='T', better='lower', role='benefit', monitoring=dict(plan={'sides': 2},"
        " looks=[look], hindsight=[]));"
        "print(hashlib.sha256(z_figure(body, 'z-t').encode()).hexdigest())"
    )
    seen = {
        subprocess.run(
            [sys.executable, "-c", code],
            env={**os.environ, "PYTHONHASHSEED": seed, "LC_ALL": "C"},
            capture_output=True,
            check=True,
            text=True,
        ).stdout
        for seed in ("1", "2")
    }
    assert len(seen) == 1


def test_the_forest_names_every_trial_with_its_risk_of_bias_in_words(views, drawn):
    said = texts(drawn[f"forest-{MAIN}"])
    for row in views[3].analyses[MAIN]["trials"]:
        assert at_most(row["label"], 29) in said
    assert {"Low", "Some concerns", "High", "not judged"} <= set(said)


def test_new_changed_and_leaving_trials_are_marked_in_the_margin(views, drawn):
    assert {"changed", "now out"} <= set(texts(drawn[f"forest-{MAIN}"]))
    assert texts(figures(views[2])[f"forest-{MAIN}"]).count("new") == 2
    assert "new" not in texts(figures(views[1])[f"forest-{MAIN}"])


def test_the_last_version_is_ghosted_only_when_there_was_one(views):
    body, before = views[3].analyses[MAIN], views[2].analyses[MAIN]
    assert "Pooled, last version" in texts(forest_figure(body, before, {}, "warming", "f"))
    assert "Pooled, last version" not in texts(forest_figure(body, None, {}, "warming", "f"))
    other = {**before, "measure": "odds-ratio"}
    assert "Pooled, last version" not in texts(forest_figure(body, other, {}, "warming", "f"))


def test_the_words_at_the_axis_come_from_the_protocol(views):
    said = " ".join(texts(forest_figure(views[1].analyses[MAIN], None, {}, "warming", "f")))
    assert "less often with warming, better" in said
    assert "more often with warming, worse" in said


def test_hostile_names_stay_text(views):
    body = views[1].analyses[MAIN]
    rows = [{**row, "label": "<script>alert(1)</script> & $x^2$ --"} for row in body["trials"]]
    svg = forest_figure({**body, "trials": rows}, None, {}, "warming", "f")
    assert "<script" not in svg
    assert any(text.startswith("<script>alert(1)") for text in texts(svg))


def test_hindsight_is_labelled(drawn):
    assert any("hindsight" in text for text in texts(drawn[f"z-{MAIN}"]))


def test_a_look_without_a_test_is_drawn_without_one(views):
    body = views[1].analyses["pain"]
    look = {
        **body["monitoring"]["looks"][0],
        "z": None,
        "boundary": None,
        "adjusted_low": None,
        "adjusted_high": None,
    }
    monitoring = {**body["monitoring"], "looks": [look], "hindsight": []}
    assert "No look has a Z yet." in z_figure({**body, "monitoring": monitoring}, "z")
    assert ET.fromstring(effect_figure({**body, "monitoring": monitoring}, "warming", "e")) is not None


def test_verdicts_differ_by_shape():
    shapes = {v: verdict_marker(v) for v in Verdict}
    assert shapes[Verdict.BENEFIT_CROSSED] != shapes[Verdict.NO_LONGER_SUPPORTED]
    assert shapes[Verdict.ACCRUING] != shapes[Verdict.REACHED_WITHOUT_CROSSING]


@pytest.mark.parametrize(("low", "high"), [(-0.2, 0.1), (-1.0, 1.0), (-4.0, 3.0), (-9.0, 9.0), (-14.0, 14.0)])
def test_log_ticks_are_few_distinct_and_hold_no_effect(low, high):
    marks = ticks(low, high, "log")
    labels = [label for _, label in marks]
    assert 2 <= len(labels) <= 7
    assert len(set(labels)) == len(labels)
    assert (0.0, "1") in marks
    assert all(low <= x <= high for x, _ in marks)


@pytest.mark.parametrize(("low", "high"), [(-0.013, 0.02), (-1.0, 1.0), (-7.0, 42.0)])
def test_even_ticks_are_few_and_hold_zero(low, high):
    labels = [label for _, label in ticks(low, high, "plain")]
    assert 3 <= len(labels) <= 8
    assert "0" in labels


def test_drawing_libraries_load_only_when_a_figure_is_made():
    code = "import sys, treering.report, treering.report.figures; sys.exit('matplotlib' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_an_amended_plan_starts_its_own_line_of_bounds(views):
    body = views[2].analyses[MAIN]
    first, second = body["monitoring"]["looks"]
    amended = {**body["monitoring"], "looks": [first, {**second, "plan_digest": "amended"}]}
    # A line through one bound only is no line: the dashed stroke between the two ledgers is gone.
    dashes = [z_figure({**body, "monitoring": m}, "z").count("stroke-dasharray: 8.4,2.8") for m in
              (body["monitoring"], amended)]  # fmt: skip
    assert dashes[0] == 3
    assert dashes[1] > dashes[0]


def test_a_futility_bound_is_drawn_and_named_only_where_there_is_one(views):
    body = views[2].analyses[MAIN]
    looks = [{**look, "futility": 0.3} for look in body["monitoring"]["looks"]]
    with_bound = {**body, "monitoring": {**body["monitoring"], "looks": looks}}
    assert "futility" in texts(z_figure(with_bound, "z"))
    assert "futility" not in texts(z_figure(body, "z"))
