"""Heads that left the house: typed in from a page or a notice, or read from an old report.json."""

from __future__ import annotations

import json
import re
from dataclasses import dataclass
from pathlib import Path

from treering.errors import AuditError

_ROOT = re.compile(r"(?<![0-9a-f])[0-9a-f]{64}(?![0-9a-f])")
_SIZE = re.compile(r"(?<![0-9a-f])\d+(?![0-9a-f])")


@dataclass(frozen=True, slots=True)
class Checkpoint:
    """A head of the past that today's store must extend.

    Parameters
    ----------
    size : int
        Number of entries.
    root : str
        Root of the tree over them, 64 hexadecimal digits.
    source : str
        Where it was read, for people.
    """

    size: int
    root: str
    source: str = "typed in"


def parse_checkpoint(text: str, *, source: str = "typed in") -> Checkpoint:
    """Read a head as it is printed: its size and its root, with or without the words around them.

    Parameters
    ----------
    text : str
        Such as ``"1024 9f86d0..."`` or ``"size 1024, root 9f86d0..."``.
    source : str, optional
        Where it was read.

    Returns
    -------
    Checkpoint
        The head.

    Raises
    ------
    AuditError
        When there is not one root and one size in it.
    """
    lower = text.lower()
    roots = _ROOT.findall(lower)
    sizes = _SIZE.findall(_ROOT.sub(" ", lower))
    if len(roots) != 1 or len(sizes) != 1:
        raise AuditError(
            "A checkpoint is the number of entries and the root, as printed in a report or notice.",
            found=text[:120],
            expected="SIZE ROOT, the root with 64 hexadecimal digits",
            next_step="Copy both from the store head of the page or the notice.",
        )
    return Checkpoint(int(sizes[0]), roots[0], source)


def checkpoint_of_report(path: Path) -> Checkpoint:
    """Read the head that an old report.json states.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    Checkpoint
        Its store head.

    Raises
    ------
    AuditError
        When it cannot be read or states none.
    """
    try:
        head = json.loads(path.read_bytes())["store_head"]
        size, root = head["size"], head["root"]
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise AuditError(
            "No store head can be read from this report.",
            file=str(path),
            found=f"{type(error).__name__}: {error}",
            next_step="Name the report.json of a released version, as it was published.",
        ) from error
    return parse_checkpoint(f"{size} {root}", source=str(path))
