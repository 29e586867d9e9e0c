"""What every command keeps to: help, wrong use, exit status, where words go, what is loaded."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from treering.cli import GROUPS, HELP

COMMANDS = [name for commands in GROUPS.values() for name in commands]
TOP = Path(__file__).parents[2]


def test_help_lists_every_command_under_its_group(run: Callable[..., Any]) -> None:
    ran = run("--help")
    assert ran.status == 0
    for name in COMMANDS:
        assert f" {name} " in ran.out, name
    places = [ran.out.index(group) for group in GROUPS]
    assert places == sorted(places)


@pytest.mark.parametrize("name", COMMANDS)
def test_each_command_has_help(run: Callable[..., Any], name: str) -> None:
    ran = run(name, "--help")
    assert ran.status == 0
    assert f"treering {name}" in ran.out


@pytest.mark.parametrize("name", COMMANDS)
def test_each_command_stands_in_the_readme(name: str) -> None:
    assert f"treering {name}" in (TOP / "README.md").read_text()


def test_each_command_has_one_line_of_help() -> None:
    assert set(HELP) == set(COMMANDS)


def test_help_loads_no_engine_no_figures_and_no_tables() -> None:
    script = (
        "import sys\nfrom treering.cli import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "heavy = {'prefect', 'matplotlib', 'pandas', 'numpy', 'scipy', 'sqlalchemy', 'pydantic'}\n"
        "print('LOADED', sorted(heavy & set(sys.modules)))\n"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "LOADED []"


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("chek",), "Did you mean `treering check`?"),
        (("nonsense",), "There is no command 'nonsense'. See `treering --help`."),
        (("check", "--bogus"), "Unknown option: --bogus. See `treering check --help`."),
        (("compare", "1", "one"), "See `treering compare --help`."),
        (("compare", "1"), "See `treering compare --help`."),
        (("history", "--since", "last week"), "unable to convert"),
        (("template", "T1"), "See `treering template --help`."),
        (("boundaries", "0.5", "x"), "See `treering boundaries --help`."),
    ],
)
def test_wrong_use_is_status_2_with_a_remark_and_no_data(
    run: Callable[..., Any], arguments: tuple[str, ...], words: str
) -> None:
    ran = run(*arguments)
    assert (ran.status, ran.out) == (2, "")
    assert words in ran.err
    assert len(ran.err.splitlines()) == 1


IN_A_REVIEW = [
    ("check", "{}"),
    ("update", "{}"),
    ("schedule", "{}"),
    ("history", "{}"),
    ("compare", "1", "2", "{}"),
    ("replay", "all", "{}"),
    ("notices", "{}"),
    ("simulate", "{}"),
    ("template", "T1", "AA", "--folder", "{}"),
]


@pytest.mark.parametrize("command", IN_A_REVIEW, ids=lambda command: command[0])
def test_a_folder_that_is_no_review_is_refused_with_what_to_do(
    run: Callable[..., Any], tmp_path: Path, command: tuple[str, ...]
) -> None:
    ran = run(*(part.format(tmp_path) for part in command))
    assert (ran.status, ran.out) == (1, "")
    assert "config/review.toml: the file is missing. Make a review with `treering start FOLDER`." in ran.err
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    "command", [c for c in IN_A_REVIEW if c[0] in {"history", "compare", "replay", "notices"}]
)
def test_a_review_without_a_store_says_how_to_get_one(
    run: Callable[..., Any], review: Any, command: tuple[str, ...]
) -> None:
    ran = run(*(part.format(review.folder) for part in command))
    assert (ran.status, ran.out) == (1, "")
    assert "there is no evidence store yet. Run `treering update` once" in ran.err
    assert not (review.folder / "store").exists()


def test_a_process_ends_with_the_status_and_keeps_data_and_remarks_apart(process: Callable[..., Any]) -> None:
    wrong = process("nonsense")
    assert (wrong.status, wrong.out) == (2, "")
    assert wrong.err.count("\n") == 1
    version = process("--version")
    assert (version.status, version.err) == (0, "")
    assert version.out.strip()


def test_a_reader_of_the_pipe_that_leaves_early_brings_no_traceback(tmp_path: Path) -> None:
    command = [Path(sys.executable).with_name("treering"), "start", tmp_path / "new"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as child:
        assert child.stdout is not None
        assert child.stderr is not None
        child.stdout.close()
        remarks = child.stderr.read()
    assert child.returncode == 1
    assert "Traceback" not in remarks
    assert "BrokenPipe" not in remarks


def test_a_place_that_cannot_be_written_is_one_remark(run: Callable[..., Any], review: Any) -> None:
    ran = run(
        "template", "T9", "AA", "--folder", review.folder, "--output", review.folder / "no" / "form.toml"
    )
    assert (ran.status, ran.out) == (1, "")
    assert ran.err == f"{review.folder}/no/form.toml: No such file or directory.\n"
