"""Rules for the reporting items about results and their discussion."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.report.coverage_methods import FILLED, MISSING, NOT_APPLICABLE, PARTLY, STALE, Found, share
from treering.report.view import ReportView


def _in_main(view: ReportView) -> list[Mapping[str, Any]]:
    return [row for body in view.analyses.values() for row in body["trials"] if row["in_main"]]


def _flow(view: ReportView) -> Found:
    decisions = view.listed("screening")
    if not decisions:
        return MISSING, "no screening decision in the store", ""
    return FILLED, f"{len(decisions)} decisions, counted; the trigger stands on top", "flow"


def _near_misses(view: ReportView) -> Found:
    excluded = [d for d in view.listed("screening") if d.get("decision") == "exclude"]
    if not view.listed("screening"):
        return MISSING, "no screening decision in the store", ""
    if not excluded:
        return NOT_APPLICABLE, "no report was excluded", ""
    return share(
        sum(bool(d.get("reason")) for d in excluded), len(excluded), "exclusions with a reason", "flow"
    )


def _characteristics(view: ReportView) -> Found:
    trials = {row["trial"] for row in _in_main(view)}
    described = {study["trial"] for study in view.listed("studies")}
    return share(len(trials & described), len(trials), "trials with their facts", "studies")


def _bias(view: ReportView) -> Found:
    rows = _in_main(view)
    judged = sum(bool(row.get("risk_of_bias")) for row in rows)
    return share(judged, len(rows), "results in the main analyses with a judgement", "trials")


def _trial_results(view: ReportView) -> Found:
    rows = _in_main(view)
    return share(sum(bool(row.get("values")) for row in rows), len(rows), "results with group data", "trials")


def _context(view: ReportView) -> Found:
    state, why, place = _bias(view)
    return (FILLED if state is FILLED else PARTLY), f"trials, participants and risk of bias ({why})", place


def _results(view: ReportView) -> Found:
    done = sum((body.get("pooled") or {}).get("estimate") is not None for body in view.analyses.values())
    return share(done, len(view.analyses), "outcomes with a pooled estimate", "outcomes")


def _explored(view: ReportView) -> Found:
    blocks = [block for body in view.analyses.values() for block in body.get("subgroups") or ()]
    if not blocks:
        return NOT_APPLICABLE, "no subgroup was planned", ""
    return share(
        sum(bool(b.get("levels")) for b in blocks), len(blocks), "planned subgroup comparisons", "outcomes"
    )


def _robustness(view: ReportView) -> Found:
    done = sum(bool(b.get("sensitivity") or b.get("leave_one_out")) for b in view.analyses.values())
    return share(
        done, len(view.analyses), "outcomes with variants", "outcomes", none="no variant differs yet"
    )


def _reporting_bias(view: ReportView) -> Found:
    done = sum(bool((b.get("small_study") or {}).get("done")) for b in view.analyses.values())
    if done:
        return PARTLY, f"small-study test for {done} outcomes; nobody has judged missing results", "outcomes"
    return MISSING, "nobody has judged missing results; too few trials for a small-study test", ""


def _certainty(view: ReportView) -> Found:
    rated = {j["outcome"]: j for j in view.listed("certainty")}
    if stale := sorted(name for name, j in rated.items() if j["stale"]):
        return STALE, f"rated on older numbers: {', '.join(stale)}", "certainty"
    return share(len(rated), len(view.analyses), "outcomes with a rating", "certainty")


def _result_changes(view: ReportView) -> Found:
    if view.version.get("previous") is None:
        return NOT_APPLICABLE, "this is the first version", ""
    uncaused = [item for body in view.changes.values() for item in body.get("uncaused", ())]
    if uncaused:
        return PARTLY, f"{len(uncaused)} changes without a cause", "changed"
    return FILLED, "every change with its cause", "changed"


def _interpretation(view: ReportView) -> Found:
    return MISSING, "a person writes it; the store holds no text", ""


def _evidence_limits(view: ReportView) -> Found:
    return (
        PARTLY,
        "heterogeneity, risk of bias and warnings are printed; nobody has written the text",
        "outcomes",
    )


def _process_limits(view: ReportView) -> Found:
    facts = f"{len(view.listed('waivers'))} waivers, {len(view.listed('waiting'))} waiting items"
    return PARTLY, f"{facts}; nobody has written the text", "process"


def _implications(view: ReportView) -> Found:
    ongoing = len(view.listed("ongoing"))
    if ongoing:
        return PARTLY, f"{ongoing} ongoing trials and the information still needed; no text", "ongoing"
    return MISSING, "a person writes it; no ongoing trial is listed", ""


RESULT_RULES = {
    "16a": _flow,
    "16b": _near_misses,
    "17": _characteristics,
    "18": _bias,
    "19": _trial_results,
    "20a": _context,
    "20b": _results,
    "20c": _explored,
    "20d": _robustness,
    "21": _reporting_bias,
    "22": _certainty,
    "L3": _result_changes,
    "23a": _interpretation,
    "23b": _evidence_limits,
    "23c": _process_limits,
    "23d": _implications,
}
