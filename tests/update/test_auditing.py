"""The audit of a whole review: its store, its released pages, and heads from old reports."""

from __future__ import annotations

import json
import shutil
import sqlite3
from pathlib import Path
from typing import Any

import pytest

from treering.errors import AuditError, StoreError
from treering.update.auditing import audit_review

TRIALS = (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138)), ("T3", (15, 80, 21, 82)))


@pytest.fixture(scope="module")
def laid_down(review_class: Any, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A review with two versions, released."""
    review = review_class(tmp_path_factory.mktemp("audited") / "review")
    for trial, counts in TRIALS[:2]:
        review.drop_pair(trial, counts)
    review.update("2026-01-05")
    review.drop_pair(*TRIALS[2])
    review.update("2026-01-12")
    folder: Path = review.folder
    return folder


@pytest.fixture
def folder(laid_down: Path, tmp_path: Path) -> Path:
    """A copy that a test may damage."""
    return Path(shutil.copytree(laid_down, tmp_path / "review"))


def failed(folder: Path, **options: Any) -> dict[int, tuple[str, ...]]:
    return {c.number: c.faults for c in audit_review(folder, **options) if not c.holds}


def pages(folder: Path, version: int) -> Path:
    (path,) = folder.glob(f"reports/*-v{version:03d}")
    return path


def alter(folder: Path, *statements: str) -> None:
    """Change the store as someone who owns the file can."""
    connection = sqlite3.connect(folder / "store" / "evidence.sqlite", isolation_level=None)
    triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
    for name, _ in triggers:
        connection.execute(f"DROP TRIGGER {name}")
    for statement in statements:
        connection.execute(statement)
    for _, sql in triggers:
        connection.execute(sql)
    connection.close()


def test_sound_review_passes_every_check(folder: Path) -> None:
    checks = audit_review(folder)
    assert [check.number for check in checks] == list(range(1, 12))
    assert [check.line() for check in checks if not check.holds] == []
    assert "2 checkpoints" in checks[9].line()  # the heads of both reports on disk
    assert json.loads(json.dumps(checks[10].to_dict()))["holds"] is True


def test_an_audit_changes_nothing(folder: Path) -> None:
    def bytes_of() -> dict[str, bytes]:
        return {str(p): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}

    before = bytes_of()
    audit_review(folder)
    assert bytes_of() == before


def test_a_review_without_a_store_is_refused_and_none_is_made(review: Any) -> None:
    with pytest.raises(StoreError, match="treering update"):
        audit_review(review.folder)
    assert not (review.folder / "store").exists()


def test_a_changed_page_is_named(folder: Path) -> None:
    page = pages(folder, 1) / "index.html"
    page.write_bytes(page.read_bytes().replace(b"a", b"b", 1))
    found = failed(folder)
    assert list(found) == [11]
    (fault,) = found[11]
    assert "version 1" in fault
    assert "2026-01-05-v001/index.html is not as it was released" in fault
    assert "treering replay" in fault


def test_a_missing_page_and_a_file_put_in_are_named(folder: Path) -> None:
    (pages(folder, 2) / "report.json").unlink()
    (pages(folder, 2) / "figures" / "extra.svg").write_text("<svg/>")
    (checks,) = failed(folder).values()
    assert ["report.json is missing" in checks[0], "extra.svg was not released" in checks[1]] == [True, True]


def test_a_folder_of_a_version_the_store_does_not_know_is_named(folder: Path) -> None:
    (folder / "reports" / "2026-02-01-v003").mkdir()
    (faults,) = failed(folder).values()
    assert "2026-02-01-v003: the store knows no such version" in faults[0]


def test_a_draft_that_a_dead_update_left_is_no_fault(folder: Path) -> None:
    shutil.copytree(pages(folder, 2), folder / "reports" / ".2026-01-19-v003.draft")
    assert failed(folder) == {}


def test_damaged_entries_leave_the_pages_to_a_fault_of_their_own(folder: Path) -> None:
    alter(folder, "UPDATE entry SET canonical = x'00' WHERE kind = 'release'")
    found = failed(folder)
    assert {3, 5, 11} <= set(found)
    assert "The releases cannot be read" in found[11][0]


def test_a_review_of_another_name_is_named(folder: Path) -> None:
    plan = folder / "config" / "review.toml"
    plan.write_text(plan.read_text().replace('id = "small"', 'id = "other"'))
    assert "another review" in failed(folder)[1][0]


def test_a_head_as_notices_print_it_is_a_checkpoint(folder: Path) -> None:
    head = json.loads((pages(folder, 1) / "report.json").read_text())["store_head"]
    assert failed(folder, checkpoint=f"size {head['size']}, root {head['root']}") == {}
    assert failed(folder, checkpoint=f"{head['size']} entries, Merkle root {head['root'].upper()}") == {}
    assert list(failed(folder, checkpoint=f"{head['size'] - 1} {head['root']}")) == [10]


def test_a_checkpoint_that_cannot_be_read_is_refused(folder: Path) -> None:
    with pytest.raises(AuditError, match="SIZE ROOT"):
        audit_review(folder, checkpoint="12 abc")
    with pytest.raises(AuditError, match="report"):
        audit_review(folder, report=folder / "config" / "review.toml")


def test_a_tail_cut_off_is_found_by_the_report_that_remains(folder: Path) -> None:
    old = folder.parent / "report.json"
    shutil.copy(pages(folder, 2) / "report.json", old)
    shutil.rmtree(pages(folder, 2))
    connection = sqlite3.connect(folder / "store" / "evidence.sqlite")
    ((cut,),) = connection.execute("SELECT entries FROM version WHERE version = 1")
    tables = [name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")]
    connection.close()
    typed = [name for name in tables if name not in ("entry", "store", "tree_node", "alembic_version")]
    statements = [f'DELETE FROM "{name}" WHERE entry > {cut + 1}' for name in typed]
    alter(folder, *statements, f"DELETE FROM entry WHERE seq > {cut + 1}")
    # What is left is a sound store of one version; its page lost its release entry at most.
    assert set(failed(folder)) <= {11}
    assert "its tail was cut" in failed(folder, report=old)[10][0].lower()
