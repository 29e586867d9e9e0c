"""What the tables about a version's making are built from."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

from treering.report.labels import value_words
from treering.report.view import ReportView

Table = dict[str, Any]


def table(
    title: str,
    heads: Sequence[str],
    rows: Iterable[Sequence[Any]],
    none: str,
    caption: str,
    *,
    anchor: str = "",
    after: str = "",
) -> Table:
    """Return one table of the section; an empty one says `none`.

    Parameters
    ----------
    title : str
        Heading.
    heads : sequence of str
        Column heads.
    rows : iterable of sequence
        Values of the cells.
    none, caption, anchor, after : str
        Said when there is no row; caption; id for links; sentence below.

    Returns
    -------
    dict
    """
    texts = [[cell(item) for item in row] for row in rows]
    return {
        "title": title,
        "heads": heads,
        "rows": texts,
        "none": none,
        "caption": caption,
        "anchor": anchor,
        "after": after,
    }


def cell(value: Any) -> str:
    """Return a value as it stands in a cell."""
    return "not given" if value is None or value == "" else value_words(value)


def title_of(view: ReportView, outcome: str | None) -> str:
    """Return the title of an outcome, or its id when it has no analysis."""
    body = view.analyses.get(outcome or "")
    return str(body["title"]) if body else (outcome or "all outcomes")
