"""How tables and JSON are printed: for a pipe, for a terminal, for machines."""

from __future__ import annotations

import json
import math
import sys

import pytest

from treering.cli.output import say_json, say_table

ROWS = [
    {
        "version": 1,
        "known": "2026-01-05T12:00:00Z",
        "why": "[b]x[/b]",
        "verdicts": ["p: q"],
    },
    {
        "version": 12,
        "known": "2026-01-19T12:00:00Z",
        "why": None,
        "verdicts": ["a: b", "c: d"],
        "root": "9" * 64,
    },
]
COLUMNS = {"version": "version", "known": "known", "why": "why", "verdicts": "verdicts", "root": "head"}


@pytest.fixture
def terminal(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    """Let stdout pass for a terminal."""
    monkeypatch.setattr(type(sys.stdout), "isatty", lambda self: self is sys.stdout, raising=False)
    monkeypatch.setenv("TERM", "dumb")


def test_a_pipe_gets_whole_values_between_tabs(capsys: pytest.CaptureFixture[str]) -> None:
    say_table(ROWS, COLUMNS, short=("root",))
    assert [line.split("\t") for line in capsys.readouterr().out.splitlines()] == [
        ["version", "known", "why", "verdicts", "head"],
        ["1", "2026-01-05T12:00:00Z", "[b]x[/b]", "p: q", "-"],
        ["12", "2026-01-19T12:00:00Z", "-", "a: b, c: d", "9" * 64],
    ]


@pytest.mark.usefixtures("terminal")
def test_a_terminal_gets_one_item_of_a_list_per_line_and_the_beginning_of_hashes(
    capsys: pytest.CaptureFixture[str],
) -> None:
    say_table(ROWS, COLUMNS, short=("root",))
    lines = [line.split() for line in capsys.readouterr().out.splitlines() if line.strip()]
    assert lines[0] == ["version", "known", "why", "verdicts", "head"]
    assert lines[2] == ["1", "2026-01-05T12:00:00Z", "[b]x[/b]", "p:", "q", "-"]
    assert lines[3] == ["12", "2026-01-19T12:00:00Z", "-", "a:", "b", "9" * 12 + "\u2026"]
    assert lines[4] == ["c:", "d"]


def test_json_has_null_for_what_is_not_finite(capsys: pytest.CaptureFixture[str]) -> None:
    say_json({"low": -math.inf, "high": math.nan, "name": "Frimodt-M\u00f8ller"})
    text = capsys.readouterr().out
    assert json.loads(text, parse_constant=pytest.fail) == {
        "low": None,
        "high": None,
        "name": "Frimodt-M\u00f8ller",
    }
    assert "\u00f8" in text, "names stay readable"
