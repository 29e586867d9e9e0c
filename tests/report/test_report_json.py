"""report.json is canonical, complete and the same for the same input."""

from __future__ import annotations

import json
import math

import pytest
import rfc8785

from treering.report import report_json
from treering.terms import CAUTION


@pytest.fixture
def report(view_of):
    return json.loads(report_json(view_of(3)))


def test_the_bytes_are_the_canonical_form_of_rfc_8785(view_of, report):
    data = report_json(view_of(3))
    assert rfc8785.dumps(report) == data
    assert b"\n" not in data


def test_the_contract_names_are_there(report):
    assert report["review"] == "hand-warming"
    assert (report["version"], report["date"], report["previous"]) == (3, "2031-05-10", 2)
    assert report["store_head"] == {"size": 60, "root": "ab" * 32}
    assert {"syntheses", "standards_coverage", "protocol_digest", "code_version"} <= set(report)
    first = report["syntheses"][0]
    assert {"id", "measure", "k", "participants", "pooled", "common", "monitoring", "changes"} <= set(first)
    names = {"information", "required", "fraction", "z", "boundary", "verdict", "looks"}
    assert names <= set(first["monitoring"])


def test_the_latest_look_stands_at_the_top_of_the_monitoring_with_the_caution(report):
    monitoring = report["syntheses"][0]["monitoring"]
    assert monitoring["fraction"] == monitoring["looks"][-1]["fraction"]
    assert monitoring["verdict"] == "crossing no longer supported"
    assert monitoring["caution"] == CAUTION


def test_an_outcome_that_is_not_monitored_has_none(report):
    assert {s["id"]: s["monitoring"] is None for s in report["syntheses"]}["minutes-to-working-line"]


def test_changes_by_cause_add_up_to_the_movement(report):
    changes = report["syntheses"][0]["changes"]
    assert list(changes) == ["correction", "retraction"]
    assert changes["retraction"]["trials"] == ["fern"]
    assert changes["correction"]["entries"] == [60]
    moved = sum(part["movement"] for part in changes.values())
    detail = report["syntheses"][0]["change_detail"]
    assert math.isclose(moved, detail["movement"], abs_tol=1e-9)
    before, after = (detail["estimate"][when]["estimate"] for when in ("before", "after"))
    assert math.isclose(moved, after - before, abs_tol=1e-9)


def test_an_invented_review_says_so_in_the_file(report):
    assert report["invented"] is True
    assert any("Invented demonstration" in note for note in report["notes"])
