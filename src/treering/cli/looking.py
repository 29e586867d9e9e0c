"""Commands that look at the past: history, compare, audit, replay, notices."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

from treering.cli.output import EXIT_DONE, EXIT_REFUSED, remark, say, say_json, say_table


def history(
    folder: Path = Path(),
    /,
    *,
    trial: str | None = None,
    person: str | None = None,
    outcome: str | None = None,
    since: date | None = None,
    until: date | None = None,
    json: bool = False,
) -> int:
    """List the versions; with a filter, list the entries it finds.

    Parameters
    ----------
    folder : Path
        The review folder.
    trial, person, outcome : str, optional
        Show the entries about a trial, by a person, about an outcome.
    since, until : date, optional
        ISO dates, 2026-01-31, between which the entries became known.
    json : bool
        Print JSON.
    """
    from treering.update.histories import entry_rows, version_rows

    with _store(folder) as store:
        if any((trial, person, outcome, since, until)):
            rows = entry_rows(
                store,
                trial=trial,
                person=person,
                outcome=outcome,
                since=since.isoformat() if since else None,
                until=until.isoformat() if until else None,
            )
            columns = {
                "seq": "entry",
                "known_at": "known",
                "true_at": "true",
                "kind": "what",
                "key": "key",
                "by": "by",
                "cause": "cause",
                "reason": "why",
            }
        else:
            rows = version_rows(store)
            columns = {
                "version": "version",
                "date": "date",
                "causes": "causes",
                "entries": "entries",
                "verdicts": "verdicts",
                "root": "head",
            }
    if json:
        say_json(rows)
    else:
        say_table(rows, columns, short=("root",))
        if not rows:
            remark("Nothing in the store fits.")
    return EXIT_DONE


def compare(first: int, second: int, folder: Path = Path(), /, *, json: bool = False) -> int:
    """Say what differs between two versions.

    Parameters
    ----------
    first, second : int
        Numbers of the versions, the older first.
    folder : Path
        The review folder.
    json : bool
        Print JSON.
    """
    from treering.update.histories import compare_versions, comparison_lines

    with _store(folder) as store:
        found = compare_versions(store, first, second)
    if json:
        say_json(found)
    else:
        for line in comparison_lines(found):
            say(line)
    return EXIT_DONE


def audit(
    folder: Path = Path(), /, *, checkpoint: str | None = None, report: Path | None = None, json: bool = False
) -> int:
    """Check the evidence store and the released pages.

    Parameters
    ----------
    folder : Path
        The review folder.
    checkpoint : str, optional
        A head as printed in a report or notice, "SIZE ROOT", that today's store must extend.
    report : Path, optional
        An old report.json to take the head from.
    json : bool
        Print JSON.
    """
    from treering.update.auditing import audit_review

    found = audit_review(folder, checkpoint=checkpoint, report=report)
    if json:
        say_json([check.to_dict() for check in found])
    else:
        for check in found:
            say(check.line())
            for fault in check.faults:
                say(f"    {fault}")
    return EXIT_DONE if all(check.holds for check in found) else EXIT_REFUSED


def replay(version: str = "all", folder: Path = Path(), /, *, json: bool = False) -> int:
    """Compute a version again and compare it byte by byte.

    Parameters
    ----------
    version : str
        A number, or "all".
    folder : Path
        The review folder.
    json : bool
        Print JSON.
    """
    from dataclasses import asdict

    from treering.errors import StoreError
    from treering.update import read_review
    from treering.update.replaying import replay as replay_version

    review = read_review(folder)
    with _store(folder) as store:
        if version != "all" and not version.isdigit():
            raise StoreError("that is no version.", found=version, expected="a number, or all")
        wanted = range(1, len(store.versions()) + 1) if version == "all" else [int(version)]
        replays = [replay_version(store, review, number) for number in wanted]
    if json:
        say_json([asdict(item) | {"holds": item.holds} for item in replays])
    else:
        for item in replays:
            _tell_replay(item)
    return EXIT_DONE if all(item.holds for item in replays) else EXIT_REFUSED


def _tell_replay(item: Any) -> None:
    odd = [file for file in item.files if file["state"] != "same bytes"]
    code = "" if item.code_then == item.code_now else f" (laid down by {item.code_then}, now {item.code_now})"
    if item.holds:
        say(f"version {item.version}: same numbers, {len(item.files)} files with the same bytes{code}")
        return
    say(f"version {item.version}: differs{code}")
    for file in odd:
        say(f"    {file['file']}: {file['state']}")
    for one in item.differences:
        say(f"    {one['place']}: {one['then']} then, {one['now']} now")


def notices(folder: Path = Path(), /, *, waiting: bool = False, json: bool = False) -> int:
    """List who was told what, and what is not delivered yet.

    Parameters
    ----------
    folder : Path
        The review folder.
    waiting : bool
        Only those that are not delivered or not acknowledged.
    json : bool
        Print JSON.
    """
    from treering.update.histories import notice_rows

    with _store(folder) as store:
        rows = notice_rows(store, waiting=waiting)
    if json:
        say_json(rows)
    else:
        say_table(
            rows,
            {
                "version": "version",
                "event": "event",
                "synthesis": "synthesis",
                "person": "person",
                "channel": "channel",
                "delivered": "delivered",
                "acknowledged": "acknowledged",
            },
        )
        if not rows:
            remark("No notices.")
    return EXIT_DONE


def _store(folder: Path) -> Any:
    from treering.update import open_evidence, read_review

    return open_evidence(read_review(folder))
