"""Conduct expectations for selection, data, bias, synthesis, certainty and updating, with their rules.

Numbers starting with C and U are those of the MECIR standards for conduct and for updates (edition of August
2023); the text is ours. What the store cannot show is missing, not assumed.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from treering.report.coverage_items import Item
from treering.report.coverage_methods import (
    FILLED,
    METHOD_RULES,
    MISSING,
    NOT_APPLICABLE,
    PARTLY,
    Found,
    share,
)
from treering.report.coverage_results import RESULT_RULES
from treering.report.view import ReportView

CONDUCT = "Conduct expectations"
Rule = Callable[[ReportView], Found]
Row = Mapping[str, Any]


def _main_rows(view: ReportView) -> list[Row]:
    return [row for body in view.analyses.values() for row in body["trials"] if row["in_main"]]


def _absent(what: str) -> Rule:
    """Make a rule for what the store does not hold in this version of the tool."""

    def rule(view: ReportView) -> Found:
        return MISSING, f"the store holds no {what}", ""

    return rule


def _always(why: str, place: str) -> Rule:
    """Make a rule for what the tool does in every version."""

    def rule(view: ReportView) -> Found:
        return FILLED, why, place

    return rule


def _unusable(view: ReportView) -> Found:
    kept = [r for b in view.analyses.values() for r in b["trials"] if r.get("status") == "no usable result"]
    return FILLED, f"{len(kept)} results without usable numbers stay listed", "process"


def _grouped(view: ReportView) -> Found:
    reports = view.listed("reports")
    return share(
        sum(bool(r.get("trial")) for r in reports), len(reports), "reports tied to a trial", "studies"
    )


def _dual_data(view: ReportView) -> Found:
    rows = _main_rows(view)
    two = sum(row.get("basis") != "waiver" for row in rows)
    state, why, place = share(
        two, len(rows), "results in the main analyses read by two people", "verification"
    )
    return state, f"{why}; waivers are listed", place


def _notices(view: ReportView) -> Found:
    if view.listed("integrity"):
        return FILLED, f"{len(view.listed('integrity'))} notices, with the effect of each", "integrity"
    return PARTLY, "no notice is stored; the store does not record sweeps that found nothing", "integrity"


def _support(view: ReportView) -> Found:
    bias = view.listed("bias")
    return share(
        sum(bool(b.get("support")) for b in bias), len(bias), "judgements with their support", "trials"
    )


def _by_bias(view: ReportView) -> Found:
    done = sum(
        any("risk of bias" in v["name"] for v in body.get("sensitivity") or ())
        for body in view.analyses.values()
    )
    if done:
        return (
            PARTLY,
            f"estimates by risk of bias for {done} outcomes; nobody has written conclusions",
            "outcomes",
        )
    return NOT_APPLICABLE, "no outcome has trials at differing risk of bias", ""


def _own_trials(view: ReportView) -> Found:
    named = sum(bool(person.own_trials) for person in view.protocol.people)
    return FILLED, f"{named} people name an own trial; a reading of it by them is refused", "people"


def _designs(view: ReportView) -> Found:
    other = [s["trial"] for s in view.listed("studies") if s.get("design") in ("cluster", "crossover")]
    if not other:
        return NOT_APPLICABLE, "no cluster or crossover trial is listed", ""
    return PARTLY, f"cluster or crossover: {', '.join(sorted(other))}; see their numbers", "studies"


def _rare(view: ReportView) -> Found:
    zero = [
        row
        for body in view.analyses.values()
        for row in body["trials"]
        if {(row.get("values") or {}).get(f"{side}_events") for side in ("intervention", "comparator")} == {0}
    ]
    if not zero:
        return NOT_APPLICABLE, "no trial without any event", ""
    return FILLED, f"{len(zero)} results without any event stay listed", "trials"


def _small_study(view: ReportView) -> Found:
    return FILLED, "done from ten trials on, otherwise the reason why not", "outcomes"


def _imputed(view: ReportView) -> Found:
    rows = _main_rows(view)
    imputed = sum(bool(row.get("imputed")) for row in rows)
    return FILLED, f"{imputed} of {len(rows)} results with imputed numbers; left out in a variant", "outcomes"


def _reasons(view: ReportView) -> Found:
    rated = view.listed("certainty")
    return share(
        sum(bool(r.get("reasons")) for r in rated), len(rated), "ratings with their reasons", "certainty"
    )


def _prospective(view: ReportView) -> Found:
    ongoing = view.listed("ongoing")
    if ongoing:
        return FILLED, f"{len(ongoing)} ongoing trials with their expected end", "ongoing"
    return MISSING, "no ongoing trial is listed", ""


def _item(item: str, topic: str, asks: str, fill: str) -> Item:
    return Item(item, topic, asks, "", fill)


#: Each item with its rule, in the order of the table.
CONDUCT_RULES: tuple[tuple[Item, Rule], ...] = (
    (_item("C37, U6", "Fresh search", "searches rerun before a version", "A"), METHOD_RULES["6"]),
    (_item("C39", "Dual inclusion", "two people decide apart", "A"), METHOD_RULES["8"]),
    (_item("C40", "Unusable kept", "no trial dropped for unusable numbers", "A"), _unusable),
    (_item("C41", "Decisions on file", "enough for flow and excluded table", "A"), RESULT_RULES["16a"]),
    (_item("C42", "Reports collated", "many reports, one trial", "A"), _grouped),
    (_item("C43", "Form", "piloted form", "AH"), _absent("record of a pilot")),
    (_item("C44", "Trials described", "enough detail for a table", "A"), RESULT_RULES["17"]),
    (
        _item("C45", "Dual characteristics", "two people for characteristics", "A"),
        _absent("second reading of them"),
    ),
    (_item("C46", "Dual outcome data", "two people apart, rule for disagreement", "A"), _dual_data),
    (_item("C47", "Use of data", "convert and derive what is reported", "A"), METHOD_RULES["13b"]),
    (_item("C48", "Errata, retractions", "look for them and act", "A"), _notices),
    (_item("C49", "Unpublished data", "seek key missing data", "A"), _absent("log of contacts")),
    (_item("C50", "Arms", "relevant arms chosen by rule", "A"), _absent("record of arms left out")),
    (
        _item("C51", "Number check", "our effects against the reports' own", "A"),
        _absent("effects as reported"),
    ),
    (_item("C52", "Bias per result", "a judgement for each result", "AH"), RESULT_RULES["18"]),
    (_item("C53", "Dual judgement", "two people for risk of bias", "A"), METHOD_RULES["11"]),
    (_item("C54", "Support", "reason for each judgement", "H"), _support),
    (_item("C57, C58", "Bias in synthesis", "used in analysis and conclusions", "A"), _by_bias),
    (_item("C59", "Trial interests", "interests of the trials considered", "AH"), METHOD_RULES["10b"]),
    (_item("C73", "Missing evidence", "results known to be missing", "AH"), METHOD_RULES["14"]),
    (
        _item("Trust", "Trust checks", "notices, conduct, text and figures, results", "AH"),
        _absent("trust checks"),
    ),
    (
        _item("Wording", "Retraction wording", "notice, work, reason, in neutral words", "A"),
        _always("notices are printed as published, without comment", "integrity"),
    ),
    (_item("Own trials", "Own-trial rule", "nobody handles an own trial", "A"), _own_trials),
    (
        _item("C61", "Scales", "same direction, reversals told", "A"),
        _always("the direction that is better stands beside each estimate", "outcomes"),
    ),
    (
        _item("C62", "Meaningful pooling", "pool only what is alike enough", "H"),
        _absent("reason for pooling"),
    ),
    (_item("C63", "Heterogeneity", "extent with uncertainty, no bare thresholds", "A"), RESULT_RULES["20b"]),
    (_item("C64", "Missing outcome data", "their effect considered", "A"), _absent("missing numbers by arm")),
    (_item("C65", "Skew", "skewed data considered", "A"), _absent("check for skew")),
    (_item("C66", "Multi-arm", "nobody counted twice", "A"), _absent("ledger of arms used")),
    (_item("C67, C68", "Subgroups", "formal comparison, few, planned", "A"), RESULT_RULES["20c"]),
    (_item("C69", "Reading heterogeneity", "taken into the conclusions", "AH"), RESULT_RULES["23a"]),
    (_item("C70", "Other designs", "cluster and crossover analysed rightly", "A"), _designs),
    (_item("C71", "Sensitivity", "robustness to choices", "A"), RESULT_RULES["20d"]),
    (
        _item("C72", "Interpretation", "from estimate and interval, no significance label", "A"),
        _always("words from a fixed list tied to the interval", "outcomes"),
    ),
    (_item("Rare", "Rare events", "fit method, trials without events shown", "A"), _rare),
    (_item("SD", "Missing SD", "derive first, impute last", "A"), _imputed),
    (_item("Small", "Small-study effects", "only with enough trials", "A"), _small_study),
    (_item("C74", "Summary table", "main outcomes with certainty", "AH"), RESULT_RULES["22"]),
    (_item("C75", "Certainty reasons", "each rating justified", "AH"), _reasons),
    (
        _item("U1-U5", "Planning", "question and methods confirmed each year", "AH"),
        _absent("yearly confirmation"),
    ),
    (
        _item("U7", "New trials", "same rules for new trials", "A"),
        _always("every trial passes the same gates of the store", "verification"),
    ),
    (_item("U8", "Old trials", "looked at again", "A"), _absent("review dates per trial")),
    (
        _item("U9", "Even judgements", "all trials judged the same way", "A"),
        _absent("tool version per judgement"),
    ),
    (
        _item("U10, U11", "Synthesis redone", "synthesis and certainty redone for the version", "A"),
        _always("every synthesis is computed anew for the version", "audit"),
    ),
    (
        _item("Archive", "Archive", "data kept so that others can use them", "A"),
        _always("report.json and CSV tables beside the page", "audit"),
    ),
    (_item("Living", "Living plan", "search, bringing in and end set before", "A"), METHOD_RULES["L1"]),
    (_item("Ongoing", "Prospective trials", "listed before results are known", "A"), _prospective),
)
