"""The intake folder: the only part of the intake that touches files.

A file leaves the folder only by one rename, into ``filed/`` or ``returned/``; the reason is written beside
it before. A run that is killed in between finds the file again and does the same.
"""

from __future__ import annotations

import os
import stat
from collections.abc import Iterable
from pathlib import Path

from treering.errors import IntakeError
from treering.intake.values import Dropped

FILED = "filed"
RETURNED = "returned"
UNFINISHED = ("~", ".part", ".tmp", ".crdownload", ".partial", ".swp")
"""Endings of files that someone is still writing or has open."""


def read_folder(folder: Path) -> list[Dropped]:
    """Read the files that lie in the intake folder, sorted by name.

    Parameters
    ----------
    folder : Path
        The intake folder; its subfolders, hidden files and unfinished files are left alone.

    Returns
    -------
    list of Dropped
        A file that can't be read comes with its problem and no content.

    Raises
    ------
    IntakeError
        If there is no such folder or it can't be listed.
    """
    try:
        names = sorted(path.name for path in folder.iterdir())
    except OSError as error:
        raise IntakeError(
            f"the intake folder can't be listed: {error.strerror}.",
            file=str(folder),
            next_step="Make it, or run in the review's folder.",
        ) from error
    wanted = [name for name in names if not name.startswith((".", "~")) and not name.endswith(UNFINISHED)]
    return [dropped for name in wanted if (dropped := _read(folder, name)) is not None]


def _read(folder: Path, name: str) -> Dropped | None:
    path = folder / name
    try:
        mode = path.lstat().st_mode
        if stat.S_ISDIR(mode):
            return None
        if not stat.S_ISREG(mode):
            return Dropped.of(name, b"", "this is a link or a device, not a file.")
        content = path.read_bytes()
    except FileNotFoundError:
        return None
    except OSError as error:
        return Dropped.of(name, b"", f"the file can't be read: {error.strerror}.")
    return Dropped.of(name, content, _name_problem(name))


def _name_problem(name: str) -> str | None:
    try:
        name.encode("utf-8")
    except UnicodeEncodeError:
        return "the file's name is not UTF-8 text; give it another name."
    if not name.isprintable():
        return "the file's name holds signs that can't be printed; give it another name."
    return None


def file_away(folder: Path, dropped: Dropped) -> Path | None:
    """Move an accepted file to ``filed/``; an earlier file of that name stays, the new one gets a number.

    Parameters
    ----------
    folder : Path
        The intake folder.
    dropped : Dropped
        The file as it was read.

    Returns
    -------
    Path or None
        Where it lies now; None if it is gone or was changed since, so that the next run reads it.

    Raises
    ------
    IntakeError
        If it can't be moved.
    """
    return _move(folder, dropped, FILED, None)


def give_back(folder: Path, dropped: Dropped, sentences: Iterable[object]) -> Path | None:
    """Move a refused file to ``returned/`` with the reasons beside it, one sentence a line.

    Parameters
    ----------
    folder : Path
        The intake folder.
    dropped : Dropped
        The file as it was read.
    sentences : iterable
        The faults.

    Returns
    -------
    Path or None
        Where it lies now; None if it is gone or was changed since, so that the next run reads it.

    Raises
    ------
    IntakeError
        If it can't be moved.
    """
    text = "".join(f"{sentence}\n" for sentence in sentences)
    return _move(folder, dropped, RETURNED, text)


def reason_path(path: Path) -> Path:
    """Return where the reasons for a returned file stand."""
    return path.with_name(f"{path.name}.reason.txt")


def _move(folder: Path, dropped: Dropped, into: str, reason: str | None) -> Path | None:
    source = folder / dropped.name
    try:
        if not _is_unchanged(source, dropped):
            return None
        shelf = folder / into
        shelf.mkdir(exist_ok=True)
        target = _free_place(shelf, dropped.name, reason)
        if reason is not None:
            _write(reason_path(target), reason)
        source.rename(target)
    except OSError as error:
        raise IntakeError(
            f"the file can't be moved to {into}/: {error.strerror}.",
            file=dropped.shown,
            next_step="Make the intake folder writable and run again; nothing is lost or doubled.",
        ) from error
    return target


def _is_unchanged(source: Path, dropped: Dropped) -> bool:
    try:
        mode = source.lstat().st_mode
        if not stat.S_ISREG(mode):
            return dropped.problem is not None
        return dropped.problem is not None or Dropped.of(dropped.name, source.read_bytes()) == Dropped.of(
            dropped.name, dropped.content
        )
    except FileNotFoundError:
        return False


def _free_place(shelf: Path, name: str, reason: str | None) -> Path:
    """Return the first name on the shelf that nothing earlier holds.

    A reason that already stands there alone, with the same words, is ours from a run that was killed.
    """
    stem, ending = Path(name).stem, Path(name).suffix
    number = 1
    while True:
        target = shelf / (name if number == 1 else f"{stem}-{number}{ending}")
        note = reason_path(target)
        if not os.path.lexists(target):
            if reason is None or not os.path.lexists(note):
                return target
            if note.read_text(encoding="utf-8") == reason:
                return target
        number += 1


def _write(path: Path, text: str) -> None:
    """Write a small file so that it is there whole or not at all."""
    draft = path.with_name(f".{path.name}.tmp")
    with draft.open("w", encoding="utf-8") as stream:
        stream.write(text)
        stream.flush()
        os.fsync(stream.fileno())
    draft.replace(path)
