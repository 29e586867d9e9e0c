"""Rules for the reporting items about the front matter, the methods and the administration of a review."""

from __future__ import annotations

from datetime import date

from treering.report.view import ReportView
from treering.terms import CoverageState

Found = tuple[CoverageState, str, str]
FILLED, PARTLY, MISSING, STALE, NOT_APPLICABLE = CoverageState


def share(done: int, all_of: int, what: str, place: str, *, none: str = "") -> Found:
    """Return filled, partly or missing by how many of a set have what is asked.

    Parameters
    ----------
    done, all_of : int
        How many have it, of how many.
    what : str
        What is counted, for the reason.
    place : str
        Id on the page.
    none : str
        Reason when the set is empty.

    Returns
    -------
    tuple
        State, reason, place.
    """
    if all_of == 0:
        return MISSING, none or f"no {what}", ""
    if done == 0:
        return MISSING, none or f"0 of {all_of} {what}", place
    state = FILLED if done == all_of else PARTLY
    return state, f"{done} of {all_of} {what}", place


def _title(view: ReportView) -> Found:
    return FILLED, "the title line is built from the protocol and the version", "top"


def _abstract(view: ReportView) -> Found:
    return (
        PARTLY,
        "the facts stand in the summary; nobody has written limitations and interpretation",
        "changed",
    )


def _rationale(view: ReportView) -> Found:
    return MISSING, "a person writes it; the store holds no text", ""


def _objectives(view: ReportView) -> Found:
    asked = [outcome for outcome in view.protocol.outcomes if outcome.question]
    return share(len(asked), len(view.protocol.outcomes), "outcomes with a question", "outcomes")


def _living(view: ReportView) -> Found:
    living = view.protocol.living
    have = [bool(living.search_every_days), bool(living.retirement_rule)]
    missing = " and ".join(
        name for name, ok in zip(("search schedule", "retirement rule"), have, strict=True) if not ok
    )
    if all(have):
        return FILLED, "search schedule, update schedule and retirement rule", "living"
    return PARTLY, f"update schedule; the protocol has no {missing}", "living"


def _eligibility(view: ReportView) -> Found:
    return PARTLY, "question, intervention and comparator; the protocol holds no eligibility criteria", "top"


def _sources(view: ReportView) -> Found:
    planned = view.protocol.living.search_every_days
    last: dict[str, str] = {}
    for run in view.listed("searches"):
        if not run.get("error"):
            last[run["source"]] = max(run["date"], last.get(run["source"], ""))
    if not last:
        return MISSING, "no search run in the store", ""
    overdue = [s for s in planned if s in last and _days(view, last[s]) > planned[s]]
    if overdue:
        return STALE, f"overdue: {', '.join(sorted(overdue))}", "searches"
    never = sorted(set(planned) - set(last))
    if never:
        return PARTLY, f"never searched: {', '.join(never)}", "searches"
    return FILLED, f"{len(last)} sources", "searches"


def _days(view: ReportView, day: str) -> int:
    return (view.date - date.fromisoformat(day[:10])).days


def _strategies(view: ReportView) -> Found:
    runs = view.listed("searches")
    return share(
        sum(bool(r.get("strategy")) for r in runs), len(runs), "search runs with their text", "searches"
    )


def _selection(view: ReportView) -> Found:
    decisions = view.listed("screening")
    two = sum(len(set(d.get("voters") or ())) >= 2 for d in decisions)
    return share(two, len(decisions), "screening decisions by two people", "flow")


def _collection(view: ReportView) -> Found:
    done = view.listed("verifications")
    two = sum(v.get("basis") != "waiver" for v in done)
    return share(two, len(done), "verified results read by two people", "verification")


def _outcomes(view: ReportView) -> Found:
    outcomes = view.protocol.outcomes
    with_window = sum(bool(outcome.window) for outcome in outcomes)
    if with_window == len(outcomes):
        return FILLED, "definitions with windows", "outcomes"
    return (
        PARTLY,
        f"definitions; {len(outcomes) - with_window} of {len(outcomes)} name no time window",
        "outcomes",
    )


def _variables(view: ReportView) -> Found:
    studies = view.listed("studies")
    return share(
        sum(bool(s.get("funding")) for s in studies), len(studies), "trials with their funding", "trials"
    )


def _bias_methods(view: ReportView) -> Found:
    bias = view.listed("bias")
    two = sum(len(set(b.get("assessors") or ())) >= 2 for b in bias)
    return share(two, len(bias), "judgements by two assessors (RoB 2 domains)", "trials")


def _measures(view: ReportView) -> Found:
    return FILLED, "measure and direction of each outcome", "outcomes"


def _assignment(view: ReportView) -> Found:
    return FILLED, "every trial with a verified result, in or left out with its reason", "trials"


def _preparation(view: ReportView) -> Found:
    imputed = sum(row.get("imputed", False) for body in view.analyses.values() for row in body["trials"])
    return (
        PARTLY,
        f"{imputed} results with imputed numbers, marked; conversions are not listed here",
        "trials",
    )


def _display(view: ReportView) -> Found:
    return FILLED, "figures and tables made from report.json by the named code version", "audit"


def _synthesis(view: ReportView) -> Found:
    return (
        PARTLY,
        "model, estimator, interval and looks; the protocol gives no reason for the model",
        "outcomes",
    )


def _subgroups(view: ReportView) -> Found:
    planned = [outcome.id for outcome in view.protocol.outcomes if outcome.subgroups]
    if planned:
        return FILLED, f"planned subgroups for {', '.join(planned)}", "outcomes"
    return NOT_APPLICABLE, "the protocol plans no subgroup", ""


def _variants(view: ReportView) -> Found:
    return FILLED, "variants by risk of bias, notices, imputation, method, and one trial left out", "outcomes"


def _missing_method(view: ReportView) -> Found:
    return MISSING, "no list of results known to be missing; only a small-study test from ten trials on", ""


def _certainty_method(view: ReportView) -> Found:
    if view.listed("certainty"):
        return PARTLY, "raters, reasons and numbers are stored; nobody has written the approach", "certainty"
    return MISSING, "no certainty judgement in the store", ""


def _method_changes(view: ReportView) -> Found:
    amendments = view.listed("amendments")
    if not amendments:
        return FILLED, "no amendment so far", "amendments"
    return FILLED, f"{len(amendments)} dated amendments; effects by cause under each outcome", "amendments"


def _registration(view: ReportView) -> Found:
    return FILLED, view.protocol.review.registration or "not registered", "audit"


def _protocol(view: ReportView) -> Found:
    if view.protocol.review.protocol_link:
        return FILLED, "link and digest", "audit"
    return PARTLY, "digest of the protocol in force; no link", "audit"


def _people(view: ReportView) -> Found:
    return PARTLY, f"{len(view.protocol.people)} people with roles; dates of joining are not stored", "people"


def _support(view: ReportView) -> Found:
    if view.protocol.review.funding:
        return FILLED, view.protocol.review.funding, "people"
    return MISSING, "the protocol names no funding", ""


def _interests(view: ReportView) -> Found:
    return MISSING, "no declaration of the authors in the store", ""


def _availability(view: ReportView) -> Found:
    return (
        FILLED,
        "store head, protocol digest, code version, tables and the command that checks them",
        "audit",
    )


METHOD_RULES = {
    "1": _title,
    "2": _abstract,
    "3": _rationale,
    "4": _objectives,
    "L1": _living,
    "5": _eligibility,
    "6": _sources,
    "7": _strategies,
    "8": _selection,
    "9": _collection,
    "10a": _outcomes,
    "10b": _variables,
    "11": _bias_methods,
    "12": _measures,
    "13a": _assignment,
    "13b": _preparation,
    "13c": _display,
    "13d": _synthesis,
    "13e": _subgroups,
    "13f": _variants,
    "14": _missing_method,
    "15": _certainty_method,
    "L2": _method_changes,
    "24a": _registration,
    "24b": _protocol,
    "24c": _method_changes,
    "L4": _people,
    "25": _support,
    "26": _interests,
    "27": _availability,
}
