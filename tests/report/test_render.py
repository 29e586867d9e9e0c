"""A version is written once, whole, and with the hashes of what was written."""

from __future__ import annotations

import hashlib

import pytest

from treering.errors import ReportError
from treering.report import render


def test_every_file_is_written_with_its_hash(views, tmp_path):
    digests = render(views[3], tmp_path)
    on_disk = {str(p.relative_to(tmp_path)) for p in tmp_path.rglob("*") if p.is_file()}
    assert set(digests) == on_disk
    assert list(digests) == sorted(digests)
    assert {"index.html", "report.json", "trials.csv", "figures/forest-pain.svg"} <= on_disk
    for name, digest in digests.items():
        assert hashlib.sha256((tmp_path / name).read_bytes()).hexdigest() == digest


def test_the_same_version_rendered_twice_is_the_same_bytes(views, tmp_path):
    first, second = tmp_path / "a", tmp_path / "b"
    first.mkdir()
    second.mkdir()
    assert render(views[2], first) == render(views[2], second)


def test_a_folder_that_holds_something_is_left_alone(views, tmp_path):
    (tmp_path / "old").write_text("kept")
    with pytest.raises(ReportError, match="not empty"):
        render(views[1], tmp_path)
    assert [p.name for p in tmp_path.iterdir()] == ["old"]


def test_a_missing_folder_is_refused(views, tmp_path):
    with pytest.raises(ReportError, match="missing"):
        render(views[1], tmp_path / "none")
