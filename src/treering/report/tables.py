"""CSV tables of one version, for readers with a spreadsheet."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from treering.report.view import ReportView

Body = Mapping[str, Any]

_TRIAL = (
    *("trial", "label", "published", "report", "in_main", "left_out", "estimate", "standard_error"),
    *("ci_low", "ci_high", "weight", "risk_of_bias", "basis", "imputed", "flags"),
)
_POOLED = (
    *("estimate", "standard_error", "ci_low", "ci_high", "z", "p", "tau2", "tau2_low", "tau2_high"),
    *("q", "q_df", "q_p", "i2", "h2", "d2", "prediction_low", "prediction_high", "method"),
)


def tables(view: ReportView) -> dict[str, bytes]:
    """Return the CSV files of a version: trials, syntheses, looks and changes.

    Parameters
    ----------
    view : ReportView
        The version.

    Returns
    -------
    dict
        File name to UTF-8 bytes. Effects are on the analysis scale (log for ratios); an empty cell is
        not estimable or absent.
    """
    return {
        "trials.csv": _trials(view),
        "syntheses.csv": _syntheses(view),
        "looks.csv": _looks(view),
        "changes.csv": _changes(view),
    }


def write_csv(heads: Sequence[str], rows: Iterable[Sequence[Any]]) -> bytes:
    """Write rows as CSV; text that a spreadsheet would run as a formula is defused by an apostrophe."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(heads)
    writer.writerows([_cell(cell) for cell in row] for row in rows)
    return text.getvalue().encode()


def _cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, list | tuple):
        return _cell("; ".join(str(item) for item in value))
    text = str(value)
    return f"'{text}" if text[:1] in ("=", "+", "-", "@", "\t", "\r") else text


def _trials(view: ReportView) -> bytes:
    rows = [(name, row) for name, body in view.analyses.items() for row in body["trials"]]
    fields = sorted({key for _, row in rows for key in row.get("values") or {}})
    return write_csv(
        ["synthesis", *_TRIAL, *fields],
        (
            [name, *(row.get(key) for key in _TRIAL), *((row.get("values") or {}).get(key) for key in fields)]
            for name, row in rows
        ),
    )


def _syntheses(view: ReportView) -> bytes:
    heads = ["synthesis", "title", "measure", "scale", "analysis", "k", "participants", *_POOLED]
    rows = []
    for name, body in view.analyses.items():
        for analysis in ("pooled", "common"):
            pooled = body.get(analysis) or {}
            head = [
                name,
                body["title"],
                body["measure"],
                body["scale"],
                "planned" if analysis == "pooled" else "common effect",
            ]
            rows.append([*head, body["k"], body["participants"], *(pooled.get(key) for key in _POOLED)])
    return write_csv(heads, rows)


#: Columns of looks.csv in the order of reading; a stored look has its fields in the order of the alphabet.
LOOK_COLUMNS = (
    "number",
    "date",
    "version",
    "trials",
    "estimate",
    "standard_error",
    "ci_low",
    "ci_high",
    "information",
    "required",
    "fraction",
    "z",
    "p",
    "spends",
    "alpha_spent",
    "boundary",
    "redrawn_boundary",
    "futility",
    "adjusted_low",
    "adjusted_high",
    "mixture_low",
    "mixture_high",
    "verdict",
    "remarks",
)


def _looks(view: ReportView) -> bytes:
    looks = [
        (name, look)
        for name, body in view.analyses.items()
        for look in (body.get("monitoring") or {}).get("looks") or ()
    ]
    known = {key for _, look in looks for key in look}
    fields = [*(key for key in LOOK_COLUMNS if key in known), *sorted(known - set(LOOK_COLUMNS))] or [
        "number"
    ]
    return write_csv(
        ["synthesis", *fields], ([name, *(look.get(key) for key in fields)] for name, look in looks)
    )


def _changes(view: ReportView) -> bytes:
    heads = [
        "synthesis",
        "what",
        "trial",
        "field",
        "before",
        "after",
        "cause",
        "reason",
        "movement",
        "movement_reversed",
    ]
    rows: list[list[Any]] = []
    for name, body in view.changes.items():
        for what in ("trials_added", "trials_removed", "trials_changed", "plan_changed"):
            for item in body.get(what, ()):
                cells = [item.get(key) for key in ("trial", "field", "before", "after", "cause", "reason")]
                rows.append([name, what.replace("_", " "), *cells, None, None])
        for part in body.get("split", ()):
            blank = [None] * 4
            rows.append(
                [name, "movement", *blank, part["cause"], None, part["movement"], part["movement_reversed"]]
            )
    return write_csv(heads, rows)
