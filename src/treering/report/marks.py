"""Words for the margin: which trials are new or changed since the version before."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any


def margin_marks(changes: Mapping[str, Any]) -> dict[str, str]:
    """Return one word per trial that differs from the version before.

    Parameters
    ----------
    changes : mapping
        One synthesis of :func:`treering.changes.compare`; empty for a base version.

    Returns
    -------
    dict
        Trial to "new", "changed", "now out" or "back in".
    """
    marks: dict[str, str] = {}
    for item in changes.get("trials_changed", ()):
        if item["field"] == "in_main":
            marks[item["trial"]] = "back in" if item["after"] else "now out"
        else:
            marks.setdefault(item["trial"], "changed")
    for item in changes.get("trials_added", ()):
        marks[item["trial"]] = "new"
    return marks
