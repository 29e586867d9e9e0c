"""Write the files of one version into a folder, and the index over all versions."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from treering.errors import ReportError
from treering.protocol import Protocol
from treering.report.figures import effect_figure, forest_figure, z_figure
from treering.report.marks import margin_marks
from treering.report.outcome import short_estimate
from treering.report.page import environment, render_page, shared_context
from treering.report.report_json import report_json
from treering.report.tables import tables
from treering.report.view import ReportView
from treering.report.wording import status_words

Body = Mapping[str, Any]


def render(view: ReportView, folder: Path) -> dict[str, str]:
    """Write report.json, the page, its figures and its tables.

    Parameters
    ----------
    view : ReportView
        The version.
    folder : Path
        An existing folder, empty or new; the caller moves it into place.

    Returns
    -------
    dict
        Relative file name to SHA-256 (hex), sorted by name.

    Raises
    ------
    ReportError
        When the folder is missing or holds a file already.
    """
    if not folder.is_dir():
        raise ReportError("the folder to write into is missing.", file=str(folder), version=view.number)
    if any(folder.iterdir()):
        raise ReportError("the folder to write into is not empty.", file=str(folder), version=view.number)
    files = build_files(view)
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)
    return {name: hashlib.sha256(files[name]).hexdigest() for name in sorted(files)}


def build_files(view: ReportView) -> dict[str, bytes]:
    """Make every file of a version in memory.

    Parameters
    ----------
    view : ReportView
        The version.

    Returns
    -------
    dict
        Relative file name to bytes.
    """
    drawn = figures(view)
    files = {"report.json": report_json(view), **tables(view)}
    page = render_page(view, drawn, list(files))
    return {
        **files,
        "index.html": page,
        **{f"figures/{name}.svg": svg.encode() for name, svg in drawn.items()},
    }


def figures(view: ReportView) -> dict[str, str]:
    """Draw the figures of every synthesis that has something to draw.

    Parameters
    ----------
    view : ReportView
        The version.

    Returns
    -------
    dict
        File stem (``forest-ID``, ``effect-ID``, ``z-ID``) to SVG.
    """
    intervention = view.protocol.review.intervention
    drawn: dict[str, str] = {}
    for name, body in view.analyses.items():
        marks = margin_marks(view.changes.get(name) or {}) if view.version.get("previous") else {}
        if any(row.get("estimate") is not None for row in body["trials"]):
            before = view.previous_analyses.get(name)
            drawn[f"forest-{name}"] = forest_figure(body, before, marks, intervention, f"forest-{name}")
        looks = (body.get("monitoring") or {}).get("looks") or ()
        if any(look.get("estimate") is not None for look in looks):
            drawn[f"effect-{name}"] = effect_figure(body, intervention, f"effect-{name}")
            drawn[f"z-{name}"] = z_figure(body, f"z-{name}")
    return drawn


def _summary(row: Body) -> dict[str, Any]:
    """Return what the index prints of one version."""
    outcomes = {
        name: {
            "estimate": short_estimate(body, body.get("pooled")),
            "verdict": ((body.get("monitoring") or {}).get("look") or {}).get("verdict"),
        }
        for name, body in row["analyses"].items()
    }
    return {
        "version": row["version"],
        "date": row["date"],
        "causes": list(row.get("causes") or ()),
        "folder": row["folder"],
        "notices": row.get("notices"),
        "outcomes": outcomes,
    }


def _columns(protocol: Protocol, versions: Sequence[Body]) -> list[dict[str, str]]:
    """Return the outcomes in the order of the protocol, then those that only older versions have."""
    titles = {outcome.id: outcome.title for outcome in protocol.outcomes}
    for row in versions:
        titles = {**{name: body["title"] for name, body in row["analyses"].items()}, **titles}
    ids = [outcome.id for outcome in protocol.outcomes]
    ids += sorted(set(titles) - set(ids))
    return [{"id": name, "title": titles[name]} for name in ids]


def render_index(protocol: Protocol, versions: Sequence[Body], status: str | Body) -> bytes:
    """Render reports/index.html over all versions.

    Parameters
    ----------
    protocol : Protocol
        The plan in force.
    versions : sequence of mapping
        One each, in any order: the version body with ``folder`` (its name under reports/), ``analyses``
        (bodies by synthesis id) and, where known, ``notices`` (how many were sent).
    status : str or mapping
        Status line of this run, or the facts for it (see :func:`treering.report.wording.status_words`).

    Returns
    -------
    bytes
        UTF-8 HTML.
    """
    context = {
        **shared_context(protocol.review, len(versions)),
        "outcomes": _columns(protocol, versions),
        "versions": [_summary(row) for row in sorted(versions, key=lambda row: -int(row["version"]))],
        "status_line": status if isinstance(status, str) else status_words(status),
    }
    return environment().get_template("index.html").render(context).encode()
