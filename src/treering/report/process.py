"""The tables about how a version came to be: who read what, what waits, what was waived or left out."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from datetime import date
from typing import Any

from treering.report.labels import value_words
from treering.report.numbers import count, plural
from treering.report.view import ReportView

Body = Mapping[str, Any]
Table = dict[str, Any]


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
        _waiting(view),
        _waivers(view),
        _left_out(view),
        _verification(view),
        _agreement(view),
        _pairs(view),
        _third_readings(view),
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


def _table(
    title: str,
    heads: Sequence[str],
    rows: Iterable[Sequence[Any]],
    none: str,
    caption: str,
    *,
    anchor: str = "",
    after: str = "",
) -> Table:
    texts = [[_cell(cell) for cell in row] for row in rows]
    return {
        "title": title,
        "heads": heads,
        "rows": texts,
        "none": none,
        "caption": caption,
        "anchor": anchor,
        "after": after,
    }


def _cell(value: Any) -> str:
    return "not given" if value is None or value == "" else value_words(value)


def _title(view: ReportView, outcome: str | None) -> str:
    body = view.analyses.get(outcome or "")
    return str(body["title"]) if body else (outcome or "all outcomes")


def _waiting(view: ReportView) -> Table:
    rows = [(w["trial"], _title(view, w.get("outcome")), w["why"]) for w in view.listed("waiting")]
    return _table(
        "Waiting items",
        ("Trial", "Outcome", "Waits because"),
        rows,
        "Nothing waits.",
        "Results that are not verified yet stand in no analysis.",
    )


def _waivers(view: ReportView) -> Table:
    rows = [
        (w["trial"], _title(view, w["outcome"]), w["person"], w["reason"]) for w in view.listed("waivers")
    ]
    heads = ("Trial", "Outcome", "Waived by", "Reason")
    return _table(
        "Waivers of the second reading",
        heads,
        rows,
        "No waiver: every result was read by two people.",
        "Each result here was let in on one reading, by a named person.",
    )


def _agreement(view: ReportView) -> Table:
    rows = [
        (value_words(a["field"]), a["compared"], a["differed"]) for a in view.listed("agreement_by_field")
    ]
    return _table(
        "Agreement of the two readers, by field",
        ("Field", "Compared", "Differed"),
        rows,
        "No number was read by two people yet.",
        "What differed was settled by a third person at the source.",
    )


def _pairs(view: ReportView) -> Table:
    rows = [
        (f"{a['first']} and {a['second']}", a["compared"], a["differed"])
        for a in view.listed("agreement_by_pair")
    ]
    return _table(
        "Agreement of the two readers, by pair",
        ("Readers", "Numbers compared", "Differed"),
        rows,
        "No pair of readers yet.",
        "Counted over the live verifications.",
    )


def _third_readings(view: ReportView) -> Table:
    rows = [
        (t["trial"], _title(view, t["outcome"]), ", ".join(value_words(name) for name in t["fields"]))
        for t in view.listed("third_readings")
    ]
    return _table(
        "To be read again by a third person",
        ("Trial", "Outcome", "Fields"),
        rows,
        "No agreed number is drawn for another reading.",
        "A share of the agreed numbers (by the protocol), drawn by a fixed rule, and every trial that a "
        "crossing rests on. They hold nothing back.",
    )


def _left_out(view: ReportView) -> Table:
    rows = [
        (row["label"], body["title"], row["left_out"])
        for body in view.analyses.values()
        for row in body["trials"]
        if not row["in_main"]
    ]
    heads = ("Trial", "Outcome", "Reason")
    return _table(
        "Trials left out of a main analysis",
        heads,
        rows,
        "No trial with a verified result is left out.",
        "They stay in the store and in the tables of this page.",
    )


def _verification(view: ReportView) -> Table:
    done = view.listed("verifications")
    bases = Counter(v["basis"] for v in done)
    fields = sum(v.get("fields") or 0 for v in done)
    differ = sum(len(v.get("differences") or ()) for v in done)
    reread = sum(bool(v.get("reread")) for v in done)
    rows = [(basis, bases[basis]) for basis in sorted(bases)]
    after = (
        ""
        if not done
        else f"{plural(fields, 'field')} compared, {differ} differed; {plural(reread, 'result')} read again."
    )
    return _table(
        "How results were verified",
        ("Basis", "Results"),
        rows,
        "No verified result in the store.",
        "Two people read each result apart; a third settles what differs.",
        anchor="verification",
        after=after,
    )


def _ongoing(view: ReportView) -> Table:
    rows = [
        (
            o["trial"],
            o.get("registration"),
            count(o.get("planned")),
            o.get("expected_end"),
            _overdue(view, o),
            ", ".join(_title(view, name) for name in o.get("outcomes") or ()),
        )
        for o in view.listed("ongoing")
    ]
    heads = ("Trial", "Registration", "Planned people", "Expected end", "State", "Outcomes")
    return _table(
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
    return _table(
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
    return _table(
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
    return _table(
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
    return _table("Amendments of the protocol", heads, rows, none, caption, anchor="amendments")


def _people(view: ReportView) -> Table:
    rows = [(p.name, ", ".join(p.roles), ", ".join(p.own_trials) or "none") for p in view.protocol.people]
    funding = view.protocol.review.funding
    after = f"Support: {funding}." if funding else "Support: the protocol names none."
    heads = ("Person", "Roles", "Own trials (kept away from)")
    return _table(
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
    return _table(
        "Living mode",
        ("Step", "Plan"),
        rows,
        "No plan.",
        "What the protocol plans while the review is living.",
        anchor="living",
    )


def _notices(view: ReportView) -> Table:
    rows = [
        (n["event"], _title(view, n["synthesis"]), n["person"], n["channel"]) for n in view.listed("notices")
    ]
    heads = ("Event", "Outcome", "Person", "Channel")
    return _table(
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
    return _table(
        "Defects of the tool that touch published versions",
        heads,
        rows,
        "None known.",
        "Published versions are never changed; a defect is told here.",
    )
