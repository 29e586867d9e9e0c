"""The tables about how a version came to be: who read what, what waits, what was waived or left out."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from datetime import date
from typing import Any

from treering.report.numbers import count, plural
from treering.report.process_parts import Table, table, title_of
from treering.report.readers import agreement, pairs, third_readings, verification, waiting, waivers
from treering.report.view import ReportView

Body = Mapping[str, Any]


def process_tables(view: ReportView) -> list[Table]:
    """Return the tables of the section, in order; an empty one says so in words.

    Parameters
    ----------
    view : ReportView
        The version.

    Returns
    -------
    list of dict
        ``title``, ``heads``, ``rows`` of text, ``none`` (said when empty), ``caption``, ``anchor`` and
        ``after``.
    """
    return [
        waiting(view),
        waivers(view),
        _left_out(view),
        verification(view),
        agreement(view),
        pairs(view),
        third_readings(view),
        _ongoing(view),
        _searches(view),
        _flow(view),
        _studies(view),
        _amendments(view),
        _people(view),
        _living(view),
        _notices(view),
        _defects(view),
    ]


def _left_out(view: ReportView) -> Table:
    rows = [
        (row["label"], body["title"], row["left_out"])
        for body in view.analyses.values()
        for row in body["trials"]
        if not row["in_main"]
    ]
    heads = ("Trial", "Outcome", "Reason")
    return table(
        "Trials left out of a main analysis",
        heads,
        rows,
        "No trial with a verified result is left out.",
        "They stay in the store and in the tables of this page.",
    )


def _ongoing(view: ReportView) -> Table:
    rows = [
        (
            o["trial"],
            o.get("registration"),
            count(o.get("planned")),
            o.get("expected_end"),
            _overdue(view, o),
            ", ".join(title_of(view, name) for name in o.get("outcomes") or ()),
        )
        for o in view.listed("ongoing")
    ]
    heads = ("Trial", "Registration", "Planned people", "Expected end", "State", "Outcomes")
    return table(
        "Ongoing trials",
        heads,
        rows,
        "No ongoing trial is listed.",
        "What is known of trials that are not reported yet.",
        anchor="ongoing",
    )


def _overdue(view: ReportView, trial: Body) -> str:
    end = trial.get("expected_end")
    past = end is not None and date.fromisoformat(end[:10]) < view.date
    return f"{trial.get('status') or 'not given'}{', past its expected end' if past else ''}"


def _searches(view: ReportView) -> Table:
    last: dict[str, Body] = {}
    for done in sorted(view.listed("searches"), key=lambda r: (r["date"], r["source"])):
        last[done["source"]] = done
    rows: list[tuple[Any, ...]] = []
    for source in sorted({*last, *view.protocol.living.search_every_days}):
        run: Body | None = last.get(source)
        every = view.protocol.living.search_every_days.get(source)
        due = f"every {every} days" if every else "not planned"
        if run is None:
            rows.append((source, "never", due, "not given", "not given", "no run in the store"))
            continue
        age = (view.date - date.fromisoformat(run["date"][:10])).days
        ago = f"{plural(age, 'day')} ago" if age else "the day of this version"
        late = ", overdue" if every and age > every else ""
        outcome = run.get("error") or f"{count(run.get('new_hits'))} new of {count(run.get('hits'))}"
        rows.append((source, f"{run['date']}, {ago}{late}", due, run.get("strategy"), run.get("by"), outcome))
    heads = ("Source", "Last run", "Planned", "Strategy", "By", "Found")
    return table(
        "Searches",
        heads,
        rows,
        "No source is planned and no search run is stored.",
        "The last run of each source, also of those that failed or never ran.",
        anchor="searches",
    )


def _flow(view: ReportView) -> Table:
    decisions = view.listed("screening")
    totals = Counter(
        (d["decision"], d.get("reason") if d["decision"] == "exclude" else None) for d in decisions
    )
    rows = [
        (decision, reason or "", totals[decision, reason])
        for decision, reason in sorted(totals, key=lambda pair: (pair[0], pair[1] or ""))
    ]
    heads = ("Decision", "Reason", "Reports")
    rows = [(d, r if r or d != "exclude" else None, n) for d, r, n in rows]
    shown = [(d, r if r else ("not given" if d == "exclude" else "none"), n) for d, r, n in rows]
    return table(
        "Flow, counted from the decisions",
        heads,
        shown,
        "No screening decision in the store.",
        "Counted from the decisions in the store, never typed in.",
        anchor="flow",
    )


def _studies(view: ReportView) -> Table:
    reports: dict[str, list[str]] = {}
    for report in view.listed("reports"):
        reports.setdefault(report["trial"], []).append(
            f"{report.get('citation') or report['report']} ({report['form']})"
        )
    rows = [
        (
            study.get("title") or study["trial"],
            study.get("registration") or "not registered",
            study.get("design"),
            count(study.get("randomised")),
            study.get("funding"),
            study.get("interests"),
            "; ".join(reports.get(study["trial"], [])) or "none listed",
        )
        for study in view.listed("studies")
    ]
    heads = ("Trial", "Registration", "Design", "Randomised", "Funding", "Interests", "Reports")
    return table(
        "Trials and their reports",
        heads,
        rows,
        "No facts about trials in the store.",
        "Each trial with all its reports; people are counted once.",
        anchor="studies",
    )


def _amendments(view: ReportView) -> Table:
    rows = [
        (
            a["date"],
            a["author"],
            "; ".join(a["clauses"]),
            a["reason"],
            "after" if a["results_seen"] else "before",
        )
        for a in view.listed("amendments")
    ]
    heads = ("Date", "Author", "Clauses", "Reason", "Results seen")
    none = "The protocol has not been amended."
    caption = "Dated changes of the plan, and whether results had been seen."
    return table("Amendments of the protocol", heads, rows, none, caption, anchor="amendments")


def _people(view: ReportView) -> Table:
    rows = [(p.name, ", ".join(p.roles), ", ".join(p.own_trials) or "none") for p in view.protocol.people]
    funding = view.protocol.review.funding
    after = f"Support: {funding}." if funding else "Support: the protocol names none."
    heads = ("Person", "Roles", "Own trials (kept away from)")
    return table(
        "People",
        heads,
        rows,
        "No person is named.",
        "Nobody holds two of the reading roles on one trial.",
        anchor="people",
        after=after,
    )


def _living(view: ReportView) -> Table:
    living = view.protocol.living
    rows: list[tuple[str, str]] = [
        ("Update", f"every {living.update_every_days} days"),
        *((f"Search of {source}", f"every {days} days") for source, days in living.search_every_days.items()),
        ("Certainty read again", f"every {living.certainty_reread_days} days"),
        ("Retirement rule", living.retirement_rule or "none: the protocol states no rule"),
    ]
    return table(
        "Living mode",
        ("Step", "Plan"),
        rows,
        "No plan.",
        "What the protocol plans while the review is living.",
        anchor="living",
    )


def _notices(view: ReportView) -> Table:
    rows = [
        (n["event"], title_of(view, n["synthesis"]), n["person"], n["channel"])
        for n in view.listed("notices")
    ]
    heads = ("Event", "Outcome", "Person", "Channel")
    return table(
        "Notices to the panel for this version",
        heads,
        rows,
        "No notice was called for.",
        "Who was told what because of this version.",
    )


def _defects(view: ReportView) -> Table:
    rows = [
        (d["id"], d["description"], ", ".join(str(v) for v in d["versions"])) for d in view.listed("defects")
    ]
    heads = ("Defect", "What", "Versions")
    return table(
        "Defects of the tool that touch published versions",
        heads,
        rows,
        "None known.",
        "Published versions are never changed; a defect is told here.",
    )
