"""treering store: copies, exports, proofs and signatures of a review, and what the exit status says."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from treering.cli import main

Run = Callable[..., tuple[int, str, str]]


@pytest.fixture(scope="module")
def folder(review_class: Any, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A review with one version."""
    review = review_class(tmp_path_factory.mktemp("kept") / "review")
    review.drop_pair("T1", (24, 110, 33, 108))
    review.drop_pair("T2", (30, 140, 41, 138))
    review.update("2026-01-05")
    path: Path = review.folder
    return path


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str]) -> Run:
    """Run a command; give exit status, stdout and stderr."""

    def call(*arguments: object) -> tuple[int, str, str]:
        with pytest.raises(SystemExit) as ended:
            main([str(argument) for argument in arguments])
        out, err = capsys.readouterr()
        return int(ended.value.code or 0), out, err

    return call


@pytest.fixture
def report(folder: Path) -> Path:
    """The report.json of version 1."""
    (path,) = folder.glob("reports/*-v001/report.json")
    return path


def test_help_lists_the_commands_of_the_group(run: Run) -> None:
    status, out, _ = run("store", "--help")
    assert status == 0
    names = ("audit", "copy", "export", "import", "prove", "prove-extends", "verify", "make-key", "sign")
    assert [name for name in names if f" {name} " not in out] == []


def test_help_of_treering_loads_nothing_of_the_store() -> None:
    code = (
        "import sys; from treering.cli import app; app(['--help'], result_action='return_value'); "
        "sys.exit(any(name in sys.modules for name in ('sqlalchemy', 'pandas', 'treering.cli.keeping')))"
    )
    assert subprocess.run([sys.executable, "-c", code], capture_output=True).returncode == 0


def test_copy_is_audited_and_its_head_printed(run: Run, folder: Path, tmp_path: Path) -> None:
    status, out, _ = run("store", "copy", tmp_path / "copy.db", folder, "--json")
    copy = json.loads(out)
    assert (status, copy["sound"]) == (0, True)
    assert run("store", "copy", tmp_path / "copy.db", folder)[0] == 1


def test_a_copy_is_audited_by_itself(run: Run, folder: Path, report: Path, tmp_path: Path) -> None:
    run("store", "copy", tmp_path / "copy.db", folder)
    status, out, _ = run("store", "audit", tmp_path / "copy.db", "--report", report)
    assert (status, len(out.splitlines())) == (0, 10)
    status, out, _ = run(
        "store", "audit", tmp_path / "copy.db", "--checkpoint", f"9999 {'ab' * 32}", "--json"
    )
    failed = [check for check in json.loads(out) if not check["holds"]]
    assert (status, [check["number"] for check in failed]) == (1, [10])
    assert "tail was cut" in failed[0]["faults"][0]
    assert run("store", "audit", tmp_path / "none.db")[0] == 1


def test_an_entry_is_proved_against_the_head_of_an_old_report(
    run: Run, folder: Path, report: Path, tmp_path: Path
) -> None:
    proof = tmp_path / "proof.json"
    status, _, err = run("store", "prove", "extraction/T1/failed/AA", folder, "--version", 1, "--to", proof)
    assert (status, str(proof) in err) == (0, True)
    status, out, _ = run("store", "verify", proof, "--report", report, "--json")
    shown = json.loads(out)
    assert (status, shown["trusted"], shown["says"]["by"]) == (0, True, "AA")
    proof.write_text(proof.read_text().replace("T1", "T9"))
    status, out, err = run("store", "verify", proof)
    assert (status, out) == (1, "")
    assert "does not hold" in err


def test_a_proof_that_leads_elsewhere_is_refused(
    run: Run, folder: Path, report: Path, tmp_path: Path
) -> None:
    run("store", "prove", 0, folder, "--to", tmp_path / "today.json")
    status, _, err = run("store", "verify", tmp_path / "today.json", "--report", report)
    assert status == 1
    assert "does not lead to the head given" in err
    status, out, err = run("store", "verify", tmp_path / "today.json")
    assert (status, "trusted: False" in out) == (0, True)
    assert "Compare its head with a printed one" in err


def test_todays_head_extends_the_printed_one(run: Run, folder: Path, report: Path, tmp_path: Path) -> None:
    head = json.loads(report.read_text())["store_head"]
    proof = tmp_path / "extends.json"
    assert run("store", "prove-extends", head["size"], folder, "--to", proof)[0] == 0
    status, out, _ = run("store", "verify", proof, "--checkpoint", f"{head['size']} {head['root']}")
    assert (status, f"extends: {head['size']} {head['root']}" in out) == (0, True)


def test_an_export_is_checked_and_imported(run: Run, folder: Path, report: Path, tmp_path: Path) -> None:
    status, out, err = run("store", "export", tmp_path / "export", folder, "--version", 1, "--json")
    assert (status, json.loads(out)["tables"]["extraction"]) == (0, 4)
    assert "addresses" in err
    assert run("store", "verify", tmp_path / "export", "--report", report)[0] == 0
    status, out, _ = run("store", "import", tmp_path / "export", tmp_path / "again.db", "--json")
    assert (status, json.loads(out)["root"]) == (0, json.loads(report.read_text())["store_head"]["root"])
    assert run("store", "import", tmp_path / "export", tmp_path / "again.db")[0] == 1


def test_a_signed_head_and_a_sign_off_hold(run: Run, folder: Path, report: Path, tmp_path: Path) -> None:
    key, public = tmp_path / "keys" / "lead", tmp_path / "keys" / "lead.pub"
    assert run("store", "make-key", key, folder)[0] == 0
    head = tmp_path / "head.txt"
    assert run("store", "sign", key, folder, "--version", 1, "--to", head)[0] == 0
    status, out, _ = run("store", "verify", head, "--key", public, "--report", report)
    assert (status, "review: small" in out) == (0, True)
    status, out, _ = run("store", "sign", key, folder, "--entry", "version/1", "--person", "CC")
    assert (status, "\nperson CC\n" in out) == (0, True)
    (tmp_path / "off.txt").write_text(out)
    assert run("store", "verify", tmp_path / "off.txt", "--key", public)[0] == 0
    assert run("store", "verify", head)[0] == 1


def test_a_key_in_the_review_folder_is_refused(run: Run, folder: Path) -> None:
    status, _, err = run("store", "make-key", folder / "config" / "key", folder)
    assert (status, "must not lie in the review folder" in err) == (1, True)


@pytest.mark.parametrize(
    "arguments",
    [
        ("prove", "study/none"),
        ("prove", "0", "--version", "7"),
        ("prove", "99999"),
        ("prove-extends", "99999"),
        ("sign", "nokey", "--person", "CC"),
    ],
)
def test_what_is_not_there_is_refused_with_the_reason(
    run: Run, folder: Path, arguments: tuple[str, ...]
) -> None:
    command, first, *rest = arguments
    status, out, err = run("store", command, first, folder, *rest)
    assert (status, out) == (1, "")
    assert err.strip()


@pytest.mark.parametrize("arguments", [("nothing",), ("prove",), ("prove-extends", "many")])
def test_wrong_use_exits_with_two(run: Run, arguments: tuple[str, ...]) -> None:
    assert run("store", *arguments)[0] == 2


def test_audit_prints_each_check_and_refuses_a_false_head(run: Run, folder: Path) -> None:
    status, out, _ = run("audit", folder)
    assert (status, len(out.splitlines())) == (0, 11)
    status, out, _ = run("audit", folder, "--checkpoint", f"3 {'ab' * 32}", "--json")
    failed = [check["number"] for check in json.loads(out) if not check["holds"]]
    assert (status, failed) == (1, [10])
