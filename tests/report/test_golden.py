"""The files of one stored version are the golden bytes; tests/golden/report/make.py writes them again."""

from __future__ import annotations

import runpy
from pathlib import Path

import pytest

from treering.report import build_files

GOLDEN = Path(__file__).parents[1] / "golden" / "report"


@pytest.fixture(scope="module")
def made():
    return build_files(runpy.run_path(str(GOLDEN / "make.py"))["golden_view"]())


@pytest.mark.parametrize("name", ["report.json", "trials.csv", "syntheses.csv", "looks.csv", "changes.csv"])
def test_a_stored_version_gives_its_golden_bytes(made, name):
    assert made[name] == (GOLDEN / name).read_bytes()
