"""The page of one version: what the templates print, worked out from the view."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from treering.report import wording
from treering.report.coverage import counts, coverage
from treering.report.labels import field_words, value_words
from treering.report.numbers import count, effect, interval, number, p_value, percent, plural, small
from treering.report.outcome import outcome_context
from treering.report.process import process_tables
from treering.report.rings import rings
from treering.report.view import ReportView
from treering.terms import CAUTION

Body = Mapping[str, Any]


@cache
def environment() -> Environment:
    """Return the template environment; text is escaped and a missing name is an error."""
    made = Environment(
        loader=PackageLoader("treering.report"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    made.filters |= {
        "count": count,
        "effect": effect,
        "ends": ends,
        "moved": wording.movement_words,
        "number": number,
        "p": p_value,
        "percent": percent,
        "plural": plural,
        "small": small,
        "value": value_words,
        "words": field_words,
    }
    return made


def ends(item: Body, body: Body, kind: str = "ci") -> str:
    """Return the interval of a row on the natural scale; ``kind`` is "ci", "adjusted" or "mixture"."""
    return interval(item.get(f"{kind}_low"), item.get(f"{kind}_high"), body["scale"], body["measure"])


def render_page(view: ReportView, figures: Mapping[str, str], files: list[str]) -> bytes:
    """Render the page of one version.

    Parameters
    ----------
    view : ReportView
        The version.
    figures : mapping
        SVG text by file stem: ``forest-ID``, ``effect-ID`` and ``z-ID``.
    files : list of str
        Names of the files that lie beside the page.

    Returns
    -------
    bytes
        UTF-8 HTML with no outside reference and no script.
    """
    rows = coverage(view)
    syntheses = [outcome_context(view, name, figures) for name in view.analyses]
    if syntheses:
        syntheses[0]["first"] = True
    rated = {judgement["outcome"] for judgement in view.listed("certainty")}
    titles = {name: body["title"] for name, body in view.analyses.items()}
    context = {
        **shared_context(view.protocol.review, view.number),
        "version": view.version,
        "store_head": view.store_head,
        "status_line": wording.status_words(view.status),
        "syntheses": syntheses,
        "monitored": any(body.get("monitoring") for body in view.analyses.values()),
        "uncaused": _uncaused(view),
        "integrity": view.listed("integrity"),
        "certainty": view.listed("certainty"),
        "unrated": [title for name, title in titles.items() if name not in rated],
        "titles": titles,
        "trial_names": {
            row["trial"]: row["label"] for body in view.analyses.values() for row in body["trials"]
        },
        "process_tables": process_tables(view),
        "coverage": rows,
        "coverage_counts": counts(rows),
        "hindsight": wording.HINDSIGHT,
        "files": files,
    }
    return environment().get_template("version.html").render(context).encode()


def shared_context(review: Any, versions: int) -> dict[str, Any]:
    """Return what every page shows: the review, the notes, the sign."""
    return {
        "review": review,
        "invented": review.invented,
        "invented_text": wording.INVENTED,
        "footer_text": wording.FOOTER,
        "caution": CAUTION,
        "rings": rings(versions),
    }


def _uncaused(view: ReportView) -> list[dict[str, str]]:
    return [
        {"title": view.analyses[name]["title"] if name in view.analyses else name, **item}
        for name, changes in view.changes.items()
        for item in changes.get("uncaused", ())
    ]


def inline(svg: str | None) -> Markup | None:
    """Mark a figure made by this package as safe to stand in the page."""
    return None if svg is None else Markup(svg)
