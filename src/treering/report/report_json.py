"""report.json: the numbers of one version for other programs, as canonical JSON (RFC 8785)."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import rfc8785

from treering.report.coverage import coverage
from treering.report.numbers import canonical
from treering.report.view import ReportView
from treering.report.wording import FOOTER, INVENTED
from treering.terms import CAUTION

FORMAT = 1
#: Fields of a look that stand at the top of ``monitoring`` as well, because they are what most readers want.
TOP = ("information", "required", "fraction", "z", "boundary", "alpha_spent", "verdict")


def report_json(view: ReportView) -> bytes:
    """Write the version as canonical JSON.

    Parameters
    ----------
    view : ReportView
        The version.

    Returns
    -------
    bytes
        RFC 8785 canonical form; numbers with 10 significant digits, effects on the analysis scale, null
        where nothing can be estimated.
    """
    return rfc8785.dumps(canonical(report_dict(view)))


def report_dict(view: ReportView) -> dict[str, Any]:
    """Return the content of report.json before it is turned into bytes."""
    review = view.protocol.review
    return {
        "format": FORMAT,
        "review": review.id,
        "title": review.title,
        "question": review.question,
        "invented": review.invented,
        "notes": [*([INVENTED] if review.invented else []), FOOTER, CAUTION],
        "version": view.number,
        "date": view.version["date"],
        "previous": view.version.get("previous"),
        "causes": view.version.get("causes") or [],
        "protocol_digest": view.version["protocol_digest"],
        "code_version": view.version["code_version"],
        "store_head": view.store_head,
        "status": view.status,
        "syntheses": [_synthesis(name, body, view) for name, body in view.analyses.items()],
        "standards_coverage": coverage(view),
        "simulation": view.simulation,
        **{name: list(view.listed(name)) for name in LISTS},
    }


LISTS = (
    "waiting",
    "waivers",
    "notices",
    "integrity",
    "searches",
    "certainty",
    "ongoing",
    "amendments",
    "defects",
)


def _synthesis(name: str, body: Mapping[str, Any], view: ReportView) -> dict[str, Any]:
    changes = view.changes.get(name) or {}
    return {
        **{key: value for key, value in body.items() if key not in ("synthesis", "version", "monitoring")},
        "id": name,
        "monitoring": _monitoring(body.get("monitoring")),
        "changes": changes_by_cause(changes),
        "change_detail": changes,
    }


def _monitoring(block: Mapping[str, Any] | None) -> dict[str, Any] | None:
    if not block:
        return None
    look = block.get("look") or {}
    return {**{name: look.get(name) for name in TOP}, **block, "caution": CAUTION}


def changes_by_cause(changes: Mapping[str, Any]) -> dict[str, Any]:
    """Gather what changed under each cause.

    Parameters
    ----------
    changes : mapping
        One synthesis of :func:`treering.changes.compare`.

    Returns
    -------
    dict
        Cause to ``movement`` and ``movement_reversed`` (analysis scale, null when the estimate
        did not move by it), ``entries`` and ``trials``.
    """
    result: dict[str, Any] = {
        cause: {"movement": None, "movement_reversed": None, "entries": [], "trials": []}
        for cause in changes.get("causes", ())
    }
    for part in changes.get("split", ()):
        if part["cause"] in result:
            result[part["cause"]] |= {k: part[k] for k in ("movement", "movement_reversed", "entries")}
    for name in ("trials_added", "trials_changed", "trials_removed"):
        for item in changes.get(name, ()):
            if item["cause"] in result and item["trial"] not in result[item["cause"]]["trials"]:
                result[item["cause"]]["trials"].append(item["trial"])
    return result
