"""Play the invented review: drop each week's files, run the update of that day."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from importlib.resources import files
from pathlib import Path

from treering.demo.weeks import Week, weeks
from treering.errors import TreeringError
from treering.update import Summary

RunUpdate = Callable[[Path, datetime], Summary]
Tell = Callable[[Week, Summary], None]


def lay_out(folder: Path) -> None:
    """Make the folder of the invented review.

    Parameters
    ----------
    folder : Path
        A folder that does not exist or is empty.

    Raises
    ------
    TreeringError
        When something is there already: the demo never touches a review.
    """
    if folder.exists() and any(folder.iterdir()):
        raise TreeringError(
            "the folder is not empty.", file=str(folder), next_step="Name a new folder for the demo."
        )
    config = folder / "config"
    config.mkdir(parents=True, exist_ok=True)
    for name in ("review.toml", "panel.toml"):
        text = files("treering.demo").joinpath("config", name).read_text(encoding="utf-8")
        (config / name).write_text(text, encoding="utf-8")
    for name in ("intake", "store", "reports"):
        (folder / name).mkdir(exist_ok=True)


def play(folder: Path, run: RunUpdate, tell: Tell) -> None:
    """Drop each week's files and run the update of its day at noon UTC.

    Parameters
    ----------
    folder : Path
        The folder that `lay_out` made.
    run : callable
        Runs one update of a folder at a time.
    tell : callable
        Is told of each week after its update.
    """
    for week in weeks():
        for file in week.files:
            (folder / "intake" / file.name).write_text(file.text, encoding="utf-8")
        tell(week, run(folder, datetime.fromisoformat(f"{week.day}T12:00:00").replace(tzinfo=UTC)))
