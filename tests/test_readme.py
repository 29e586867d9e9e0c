"""The README states the job, its two commands can be found by machines, and what it shows exists."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import pytest
from cyclopts import CycloptsError

from treering.cli import HELP, app

TOP = Path(__file__).parents[1]
README = (TOP / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (TOP / "DEVELOPERS.md").read_text(encoding="utf-8")


def command_after(mark: str) -> str:
    """Return the fenced command that stands right after a marker, as .ci/run finds it."""
    found = re.search(rf"^<!-- {mark} -->\n```bash\n(.+?)\n```$", README, flags=re.M | re.S)
    assert found, f"no fenced command right after <!-- {mark} -->"
    return found[1]


def invocations(text: str) -> list[str]:
    """Return every `treering ...` in fenced blocks and in code spans, without comments."""
    fenced = re.findall(r"^```\w*\n(.*?)^```$", text, flags=re.M | re.S)
    lines = [line.split("  #")[0].split(" #")[0] for block in fenced for line in block.splitlines()]
    spans = re.findall(r"`([^`\n]+)`", re.sub(r"^```.*?^```$", "", text, flags=re.M | re.S))
    parts = [part.strip() for line in (*lines, *spans) for part in line.split("&&")]
    return sorted({part for part in parts if re.match(r"(\.venv/bin/)?treering( |$)", part)})


SHOWN = sorted(set(invocations(README) + invocations(DEVELOPERS)))


def test_the_first_paragraph_states_the_job() -> None:
    first = README.split("\n\n")[0]
    for word in (
        "weekly update",
        "living systematic review",
        "intake folder",
        "two extractors",
        "append-only",
    ):
        assert word in first
    for word in ("re-pools", "sequential monitoring boundaries", "dated report", "notifies", "audit"):
        assert word in first
    assert not first.startswith("#")


def test_the_demo_command_installs_and_plays_the_demo() -> None:
    assert command_after("demo").endswith("pip install -q . && .venv/bin/treering demo demo-review")


def test_the_tests_command_installs_for_work_and_runs_pytest() -> None:
    assert command_after("tests").endswith("pip install -q -e '.[test]' && .venv/bin/pytest")


def test_each_command_is_shown_at_least_once() -> None:
    shown = {line.split()[1] for line in SHOWN if len(line.split()) > 1}
    assert set(HELP) <= shown, set(HELP) - shown


@pytest.mark.parametrize("line", SHOWN)
def test_what_is_shown_names_a_command_and_options_that_exist(line: str) -> None:
    words = shlex.split(line)[1:]
    if not words or words == ["--help"]:
        return
    assert words[0] in HELP, f"there is no command {words[0]}"
    command = app[words[0]]
    if command.default_command is None:  # a group of commands, such as `treering store export`
        assert len(words) == 1 or words[1] in command, f"there is no command {' '.join(words[:2])}"
        if len(words) == 1:
            return
        command = command[words[1]]
    known = {name for argument in command.assemble_argument_collection() for name in argument.names}
    options = {word.split("=")[0] for word in words if word.startswith("--")} - {"--help"}
    assert options <= known, f"{line}: no such option {options - known}"


@pytest.mark.parametrize("line", [line for line in SHOWN if not re.search(r"[A-Z]{3,}|store", line)])
def test_a_whole_example_is_one_that_the_command_line_takes(line: str) -> None:
    words = shlex.split(line)[1:]
    needs = {"compare": 3, "demo": 2, "start": 2, "template": 3, "pool": 3}
    if len(words) < needs.get(words[0] if words else "", 1):
        return  # named in a sentence, without what it would work on
    try:
        app.parse_args(words, exit_on_error=False, print_error=False)
    except CycloptsError as error:
        pytest.fail(f"{line}: {error}")


def test_every_file_the_readme_points_to_is_there() -> None:
    for target in re.findall(r"\]\(([^)#]+)\)", README + DEVELOPERS):
        if "://" not in target:
            assert (TOP / target).exists(), target
