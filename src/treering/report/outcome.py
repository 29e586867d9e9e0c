"""What the page prints about one outcome."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from typing import Any

from markupsafe import Markup

from treering.protocol import Outcome
from treering.report import wording
from treering.report.figures.forest import axis_note
from treering.report.inputs import monitoring_inputs, rests_on_pairs
from treering.report.labels import field_words, other_words, side_words, value_words
from treering.report.marks import margin_marks
from treering.report.numbers import effect, interval, number, plural
from treering.report.outlook import outlook_words
from treering.report.view import ReportView

Body = Mapping[str, Any]

#: Two orders of the split that differ by less than this (analysis scale) are called the same.
ORDER_TOLERANCE = 5e-4


def outcome_context(view: ReportView, name: str, figures: Mapping[str, str]) -> dict[str, Any]:
    """Work out every word and figure of one outcome's section.

    Parameters
    ----------
    view : ReportView
        The version.
    name : str
        Synthesis id.
    figures : mapping
        SVG text by file stem.

    Returns
    -------
    dict
        Context of ``outcome.html`` and what it includes.
    """
    body = view.analyses[name]
    outcome = view.outcome(name)
    before = view.previous_analyses.get(name)
    changes = view.changes.get(name) or {}
    level = outcome.pooling.level if outcome else 0.95
    measure = wording.measure_words(body["measure"])
    names = {row["trial"]: row["label"] for row in body["trials"]}
    return {
        "first": False,
        "anchor": f"o-{name}",
        "body": body,
        "measure": f"{measure[0].upper()}{measure[1:]}",
        "changes": {"causes": [], "split": [], "split_note": None, **changes},
        "small_measure": measure,
        "names": names,
        **_estimate_words(body, view, level),
        **_change_words(body, before, changes),
        **_trial_words(view, body, changes),
        "bias": bias_rows(view, name),
        **_figures(name, body, before, figures),
        **_monitoring_words(view, outcome, body, before),
        "certainty": next((j for j in view.listed("certainty") if j["outcome"] == name), None),
        "outlook": outlook_words(body, names),
        "counted_once": counted_once_words(body, names),
        "bayes": [(field_words(k), value_words(v)) for k, v in (body.get("bayes") or {}).items()],
    }


def _estimate_words(body: Body, view: ReportView, level: float) -> dict[str, Any]:
    pooled = body.get("pooled") or {}
    return {
        "has_estimate": pooled.get("estimate") is not None,
        "headline": wording.headline(body, level),
        "reading": wording.reading(body),
        "absolute": wording.absolute_words(
            body, view.protocol.review.intervention, view.protocol.review.comparator
        ),
        "prediction": wording.prediction_words(body),
        "explain": wording.explain_interval(level),
        "no_effect": wording.no_effect(body["scale"]),
        "mid": wording.mid_words(body),
        "common_line": short_estimate(body, body.get("common")),
    }


def counted_once_words(body: Body, names: Mapping[str, str]) -> str:
    """Say what the check found that holds each arm against what was randomised; empty without one."""
    arms = body.get("arms")
    if not arms:
        return ""
    words = f"{plural(arms['checked'], 'trial')} held against what the arms randomised: "
    words += "nobody is counted twice" if arms["passed"] else "some are left out for it"
    refused = [f"{names.get(item['trial'], item['trial'])}: {item['why']}" for item in arms["refused"]]
    unknown = [f"{names.get(item['trial'], item['trial'])} ({item['why']})" for item in arms["not_checked"]]
    parts = [words, *refused, *([f"not checked: {', '.join(unknown)}"] if unknown else [])]
    return "; ".join(parts) + "."


def short_estimate(body: Body, pooled: Body | None) -> str:
    """Return "0.74 (0.60 to 0.91)", or why there is nothing to print."""
    if not pooled or pooled.get("estimate") is None:
        return "not estimable"
    scale, measure = body["scale"], body["measure"]
    ends = interval(pooled["ci_low"], pooled["ci_high"], scale, measure)
    return f"{effect(pooled['estimate'], scale, measure)} ({ends})"


def _change_words(body: Body, before: Body | None, changes: Body) -> dict[str, Any]:
    effect_of_order = changes.get("order_effect")
    return {
        "now": short_estimate(body, body.get("pooled")),
        "before": short_estimate(before, before.get("pooled")) if before else "none",
        "moved": "" if before is None else wording.movement_words(changes.get("movement"), body["scale"]),
        "change_lines": change_lines(changes),
        "moved_at_all": any(p["movement"] or p["movement_reversed"] for p in changes.get("split", ())),
        "order_matters": effect_of_order is not None and effect_of_order > ORDER_TOLERANCE,
    }


def change_lines(changes: Body) -> list[str]:
    """Say each change of a synthesis in one line, with its cause and reason.

    Parameters
    ----------
    changes : mapping
        One synthesis of :func:`treering.changes.compare`.

    Returns
    -------
    list of str
    """
    lines = []
    for item in changes.get("trials_added", ()):
        where = "" if item["in_main"] else f", left out of the main analysis: {item['left_out']}"
        lines.append(f"{item['label']}: added{where}{_why(item)}")
    for item in changes.get("trials_removed", ()):
        lines.append(f"{item['label']}: left the main analysis: {item['left_out']}{_why(item)}")
    told = {"left_out", "status", "flags", *(("in_main",) if changes.get("trials_removed") else ())}
    moved_in_or_out = {i["trial"] for i in changes.get("trials_changed", ()) if i["field"] == "in_main"}
    numbers = {i["trial"] for i in changes.get("trials_changed", ()) if i["field"].startswith("values.")}
    for item in changes.get("trials_changed", ()):
        follows = item["trial"] in numbers and item["field"] in ("estimate", "standard_error")
        if item["field"] not in told and not follows:
            moved = f"{_shown(item['before'])} became {_shown(item['after'])}"
            lines.append(f"{item['label']}: {field_words(item['field'])} {moved}{_why(item)}")
        if item["field"] == "flags" and item["trial"] not in moved_in_or_out:
            fresh = [flag for flag in item["after"] or () if flag not in (item["before"] or ())]
            lines.append(f"{item['label']}: flagged {'; '.join(fresh) or 'no longer'}{_why(item)}")
    for item in changes.get("plan_changed", ()):
        moved = f"{_shown(item['before'])} became {_shown(item['after'])}"
        lines.append(f"Plan: {field_words(item['field'])} {moved}{_why(item)}")
    return lines


def _shown(value: Any) -> str:
    return "none" if value is None or value == "" else value_words(value)


def _why(item: Body) -> str:
    cause = item["cause"] or "NO CAUSE KNOWN"
    reason = item.get("reason")
    return f" ({cause}: {reason})" if reason else f" ({cause})"


def _trial_words(view: ReportView, body: Body, changes: Body) -> dict[str, Any]:
    judged = Counter(row.get("risk_of_bias") or "not judged" for row in body["trials"] if row["in_main"])
    order = ("Low", "Some concerns", "High", "not judged")
    return {
        "arms": {row["trial"]: arm_words(row.get("values") or {}) for row in body["trials"]},
        "marks": margin_marks(changes) if view.version.get("previous") else {},
        "bias_line": ", ".join(f"{judged[word]} {word}" for word in order if judged[word]) or "no trial",
    }


#: The domains of RoB 2, in its order, as the store names them.
DOMAINS = ("randomisation", "deviations", "missing_data", "measurement", "selection")


def bias_rows(view: ReportView, name: str) -> list[dict[str, Any]]:
    """Return the risk-of-bias judgements of one outcome's results, with words for each domain.

    Parameters
    ----------
    view : ReportView
        The version.
    name : str
        Synthesis id.

    Returns
    -------
    list of dict
        ``trial``, ``domains`` (five words in order), ``overall``, ``support`` and ``assessors``.
    """
    return [
        {
            "trial": judgement["trial"],
            "domains": [(judgement.get("domains") or {}).get(d) or "not judged" for d in DOMAINS],
            "overall": judgement["overall"],
            "support": support_words(judgement.get("support") or {}),
            "assessors": ", ".join(judgement.get("assessors") or ()) or "not given",
        }
        for judgement in view.listed("bias")
        if judgement["outcome"] == name
    ]


def support_words(support: Body) -> str:
    """Return the support of a judgement; one text given for every domain is said once."""
    texts = {str(text) for text in support.values()}
    if len(texts) == 1 and len(support) > 1:
        return f"every domain: {texts.pop()}"
    return value_words(support) if support else "none given"


def arm_words(values: Body) -> tuple[str, str, str]:
    """Return what a trial reports of the intervention, of the comparator, and of both together."""
    return side_words(values, "intervention"), side_words(values, "comparator"), other_words(values)


def _figures(name: str, body: Body, before: Body | None, figures: Mapping[str, str]) -> dict[str, Any]:
    drawn = {
        key: Markup(figures[f"{stem}-{name}"]) if f"{stem}-{name}" in figures else None
        for key, stem in (("forest", "forest"), ("effect_svg", "effect"), ("z_svg", "z"))
    }
    note = axis_note(body)
    ghost = bool(((before or {}).get("pooled") or {}).get("estimate") is not None)
    return {
        **drawn,
        "axis_note": note,
        "axis_note_horizontal": note.replace("vertical", "horizontal"),
        "has_ghost": ghost and before is not None and before["measure"] == body["measure"],
    }


def _monitoring_words(
    view: ReportView, outcome: Outcome | None, body: Body, before: Body | None
) -> dict[str, Any]:
    block = body.get("monitoring")
    if not block:
        return {"verdict_line": "not monitored", "simulation": None}
    look = block.get("look")
    verdict = look["verdict"] if look else "no look yet"
    last = (((before or {}).get("monitoring") or {}).get("look") or {}).get("verdict")
    line = verdict if last in (None, verdict) else f"{verdict} (last version: {last})"
    return {
        "verdict_line": line,
        "verdict": f"{verdict[0].upper()}{verdict[1:]}",
        "sign": "±" if block["plan"].get("sides", 2) == 2 else "",
        "inputs": monitoring_inputs(view, outcome, body),
        "bound_line": bound_words(look, block["plan"]),
        "rests": rests_on_pairs(body),
        "simulation": _simulation((view.simulation or {}).get(body["synthesis"]), look),
    }


def _simulation(kept: Body | None, look: Body | None) -> dict[str, Any] | None:
    """Return a kept simulation, marked when it was made for another plan than the one of the last look."""
    if not kept:
        return None
    other = look is not None and kept.get("plan_digest") != look["plan_digest"]
    return {**kept, "other_plan": other}


def bound_words(look: Body | None, plan: Body) -> str:
    """Name the boundary a look was judged against."""
    if not look:
        return "no boundary"
    sign = "±" if plan.get("sides", 2) == 2 else ""
    if look.get("boundary") is not None:
        return f"boundary {sign}{number(look['boundary'])}"
    if look.get("redrawn_boundary") is not None:
        return f"compared with the boundary redrawn at this share, {sign}{number(look['redrawn_boundary'])}"
    return "no boundary that a Z could cross"
