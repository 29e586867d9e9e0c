"""Commands that run a review: demo, start, template, check, update, schedule."""

from __future__ import annotations

import sys
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from treering.cli.output import EXIT_DONE, EXIT_REFUSED, remark, say, say_json

if TYPE_CHECKING:
    from treering.demo.weeks import Week
    from treering.update import Summary


def demo(folder: Path, /, *, verbose: bool = False, json: bool = False) -> int:
    """Play the invented review through seven weekly updates.

    Parameters
    ----------
    folder : Path
        A new or empty folder.
    verbose : bool
        Show the engine's own log.
    json : bool
        Print one JSON object per line: one for each week, then the place of the reports.
    """
    run = _flow(verbose)
    from treering.demo import lay_out, play

    lay_out(folder)
    remark(
        "Invented data from end to end. The engine starts first; on a new machine that takes half a minute."
    )

    def tell(week: Week, summary: Summary) -> None:
        if json:
            say_json({"story": week.story, **_as_dict(summary)}, line=True)
        else:
            say(f"{week.day}  {week.story}")
            _tell(summary, indent="            ")

    play(folder, run, tell)
    remark("A report informs a panel; it is no treatment recommendation.")
    index = (folder / "reports" / "index.html").resolve()
    if json:
        say_json({"index": str(index)}, line=True)
    else:
        say(f"All versions: {index}")
    return EXIT_DONE


def start(folder: Path, /) -> int:
    """Make a new review folder with a commented config.

    Parameters
    ----------
    folder : Path
        A folder that holds no review yet.
    """
    from treering.update.starting import start_review

    for path in start_review(folder):
        say(str(path))
    remark("Fill in config/review.toml and config/panel.toml, then run `treering check` in the folder.")
    return EXIT_DONE


def template(
    trial: str, extractor: str, /, *, folder: Path = Path(), form: str = "toml", output: Path | None = None
) -> int:
    """Write a blank extraction form for one trial.

    Parameters
    ----------
    trial : str
        Trial id.
    extractor : str
        Id of the person who reads it.
    folder : Path
        The review folder.
    form : str
        "toml" or "csv".
    output : Path, optional
        Where to write it; stdout when left out.
    """
    from treering.update import read_review
    from treering.update.starting import blank_form

    text = blank_form(read_review(folder).protocol, trial, extractor, form)
    if output is None:
        say(text.rstrip("\n"))
    else:
        with output.open("x", encoding="utf-8") as file:
            file.write(text)
        remark(f"Written: {output}")
    return EXIT_DONE


def check(folder: Path = Path(), /, *, json: bool = False) -> int:
    """Read config and intake and say what an update would do; writes nothing.

    Parameters
    ----------
    folder : Path
        The review folder.
    json : bool
        Print JSON.
    """
    from treering.update.previewing import preview

    found = preview(folder, datetime.now(UTC).replace(microsecond=0).isoformat())
    if json:
        say_json(found)
    else:
        for line in _preview_lines(found):
            say(line)
    return EXIT_REFUSED if found["returned"] else EXIT_DONE


def update(folder: Path = Path(), /, *, verbose: bool = False, json: bool = False) -> int:
    """Run one weekly update.

    Parameters
    ----------
    folder : Path
        The review folder.
    verbose : bool
        Show the engine's own log.
    json : bool
        Print JSON.
    """
    from treering.update import read_review

    read_review(folder)  # a fault in the config is told before the engine starts
    if sys.stderr.isatty():
        remark("The engine starts first; on a new machine that takes half a minute.")
    summary = _flow(verbose)(folder, datetime.now(UTC))
    if json:
        say_json(_as_dict(summary))
    else:
        _tell(summary)
    return EXIT_REFUSED if summary.returned or summary.undelivered else EXIT_DONE


def schedule(folder: Path = Path(), /, *, day: str = "Thursday", hour: int = 6, verbose: bool = False) -> int:
    """Run the update every week until stopped.

    Parameters
    ----------
    folder : Path
        The review folder.
    day : str
        Day of the week.
    hour : int
        Hour of the day, UTC.
    verbose : bool
        Show the engine's own log.
    """
    from treering.update import read_review

    read_review(folder)
    from treering_flows.engine import prepare_engine

    prepare_engine(verbose=verbose, unwatched=True)
    from treering_flows.schedule import cron_of, serve_weekly

    cron_of(day, hour)  # a time that is none is told before anything starts
    remark(f"Updates every {day} at {hour:02d}:00 UTC until stopped. The evidence store has its own lock.")
    serve_weekly(folder.resolve(), day=day, hour=hour)
    return EXIT_DONE


def _flow(verbose: bool) -> Any:
    """Return a function that runs the flow; the engine's defaults are set before it is loaded."""
    from treering_flows.engine import prepare_engine

    prepare_engine(verbose=verbose)
    from treering_flows.weekly import weekly_update

    def run(folder: Path, as_of: datetime) -> Summary:
        return weekly_update(str(folder), as_of.date().isoformat(), as_of)

    return run


def _as_dict(summary: Summary) -> dict[str, Any]:
    from dataclasses import asdict

    return asdict(summary)


def _tell(summary: Summary, indent: str = "") -> None:
    """Print one update: version, verdicts, who was told; faults and what waits go to stderr."""
    made = f"version {summary.version}" if summary.version else "nothing new, status line renewed"
    say(f"{indent}{made}")
    for name, verdict in summary.verdicts.items() if summary.version else ():
        say(f"{indent}{name}: {verdict}")
    for event in sorted({(item["event"], item["synthesis"]) for item in summary.told}):
        people = sorted({i["person"] for i in summary.told if (i["event"], i["synthesis"]) == event})
        say(f"{indent}told of '{event[0]}' ({event[1]}): {', '.join(people)}")
    for text in summary.remarks:
        remark(text)
    for item in summary.waiting:
        remark(f"waits: {item['trial']}, {item['outcome']}: {item['why']}")
    for item in summary.returned:
        for text in item["faults"]:
            remark(f"returned: {text}")
    for text in summary.undelivered:
        remark(f"not delivered: {text}")
    if not indent:
        say(summary.index)


def _preview_lines(found: dict[str, Any]) -> list[str]:
    files = "1 file" if len(found["files"]) == 1 else f"{len(found['files'])} files"
    lines = [f"{files} in intake, {len(found['returned']) or 'none'} would go back."]
    for item in found["returned"]:
        lines += [f"  {fault}" for fault in item["faults"]]
    lines += [f"  verified: {item['trial']}, {item['outcome']}" for item in found["verified"]]
    lines += [f"  look at: {text}" for text in found["remarks"]]
    lines += [f"  waits: {item['trial']}, {item['outcome']}: {item['why']}" for item in found["waiting"]]
    lines.append(
        "An update would lay down a new version."
        if found["new_version"]
        else "An update would lay down no version."
    )
    return lines
