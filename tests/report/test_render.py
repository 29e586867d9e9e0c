"""A version is written once, whole, and with the hashes of what was written."""

from __future__ import annotations

import hashlib

import pytest

from treering.errors import ReportError
from treering.report import build_files, build_view, render


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


def turned(value):
    """The same JSON value with the fields of every mapping in another order."""
    if isinstance(value, dict):
        return {key: turned(value[key]) for key in sorted(value, reverse=True)}
    return [turned(item) for item in value] if isinstance(value, list) else value


def test_no_file_depends_on_the_order_in_which_fields_were_stored(views):
    view = views[3]
    other = build_view(
        protocol=view.protocol,
        version=turned(view.version),
        store_head=turned(view.store_head),
        analyses={name: turned(body) for name, body in view.analyses.items()},
        previous_analyses={name: turned(body) for name, body in view.previous_analyses.items()},
        changes={name: turned(body) for name, body in view.changes.items()},
        status=turned(view.status),
        **{name: turned(records) for name, records in view.records.items()},
    )
    first, second = build_files(view), build_files(other)
    assert [name for name in first if first[name] != second[name]] == []
