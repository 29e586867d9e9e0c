"""The intake before the real evidence store: weeks in a row, and runs that die at any step."""

from __future__ import annotations

import json

import pytest

from treering import intake, store
from treering.terms import Cause, EntryKind

FFA = "failed-first-attempt"
WRONG = {
    "intervention_events": 42,
    "intervention_total": 120,
    "comparator_events": 36,
    "comparator_total": 119,
}
RIGHT = {**WRONG, "intervention_events": 26}


class Killed(Exception):
    """The run dies here."""


def run(folder, ledger, protocol, day, *, dies_after=99):
    """Run the intake's share of an update; it dies after the given step."""
    known = f"{day}T06:00:00Z"
    files = intake.read_folder(folder)
    checked = intake.check(intake.read_records(files), protocol, ledger.state(), known_date=day)
    new = intake.entries_for(checked, protocol, ledger.state(), day)
    steps = [
        lambda: ledger.append(new, known_at=known),
        lambda: ledger.append(intake.settle(ledger.state(), protocol).entries, known_at=known),
        *(lambda f=f: intake.give_back(folder, f, checked.faults_of(f)) for f in checked.returned),
        *(lambda f=f: intake.file_away(folder, f) for f in (*checked.accepted, *checked.doubles)),
    ]
    for number, step in enumerate(steps):
        if number == dies_after:
            raise Killed
        step()
    return len(steps)


@pytest.fixture
def weeks(reading, adjudication):
    """Invented weeks: day and what is dropped before it."""
    why = "erratum: two events were missing"
    notice = {
        "record": "integrity notice",
        "trial": "HW-01",
        "notice": "retraction",
        "date": "2026-01-30",
        "reason": "see the journal's notice",
        "seen_by": "IN",
    }
    taken_back = {
        "record": "withdrawal",
        "key": "integrity/HW-01/2026-01-30/retraction",
        "reason": "it concerned another trial",
        "by": "SL",
        "date": "2026-02-09",
    }
    return [
        ("2026-01-05", {"a.toml": reading("MV"), "b.toml": reading("OK", values=WRONG), "bad.toml": "half"}),
        ("2026-01-12", {"c.toml": adjudication()}),
        (
            "2026-01-19",
            {
                "d.toml": reading("MV", values=RIGHT, correction=why),
                "e.toml": reading("OK", values=RIGHT, correction=why),
                "copy.toml": reading("MV"),
            },
        ),
        ("2026-02-02", {"n.json": json.dumps(notice)}),
        ("2026-02-09", {"w.json": json.dumps(taken_back)}),
    ]


def drop(folder, files) -> None:
    for name, text in files.items():
        (folder / name).write_text(text)


def play(tmp_path, protocol, weeks, name, *, dies_in=None, dies_after=99):
    """Play all weeks; one of them dies after a step and is run again."""
    folder = tmp_path / name
    folder.mkdir()
    ledger = store.create(folder / "evidence.sqlite", review="hand-warming")
    drops = folder / "intake"
    drops.mkdir()
    steps = 0
    for week, (day, files) in enumerate(weeks):
        drop(drops, files)
        if week == dies_in:
            with pytest.raises(Killed):
                run(drops, ledger, protocol, day, dies_after=dies_after)
        steps = max(steps, run(drops, ledger, protocol, day))
        assert intake.read_folder(drops) == []
    kept = sorted(str(p.relative_to(drops)) for p in drops.rglob("*") if p.is_file())
    entries = [(e.seq, e.kind, e.key, e.body, e.true_at, e.cause, e.hash) for e in ledger.entries()]
    state = ledger.state()
    ledger.close()
    return entries, kept, state, steps


def test_weeks_in_a_row_leave_the_result_with_its_history(tmp_path, demo_protocol, weeks) -> None:
    _, kept, state, _ = play(tmp_path, demo_protocol, weeks, "plain")
    values = [e.body["values"]["intervention_events"] for e in state.all(EntryKind.RESULT)]
    assert values == [24, 26]
    assert [e.cause for e in state.all(EntryKind.RESULT)] == [Cause.NEW_TRIAL, Cause.CORRECTION]
    assert state.live(EntryKind.INTEGRITY) == []
    assert [e.cause for e in state.all(EntryKind.INTEGRITY)] == [Cause.RETRACTION]
    assert "returned/bad.toml.reason.txt" in kept
    assert "filed/copy.toml" in kept


def test_a_run_that_dies_anywhere_and_runs_again_leaves_the_same(tmp_path, demo_protocol, weeks) -> None:
    entries, kept, _, steps = play(tmp_path, demo_protocol, weeks, "plain")
    places = [(week, step) for week in range(3) for step in range(steps)]
    for week, step in places:
        files = len(weeks[week][1])
        if step >= files + 2:
            continue
        again = play(tmp_path, demo_protocol, weeks, f"w{week}s{step}", dies_in=week, dies_after=step)
        assert again[0] == entries
        assert again[1] == kept
