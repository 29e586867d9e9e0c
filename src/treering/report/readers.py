"""The tables about the readers: what waits, what was waived, how they agreed, what is read again."""

from __future__ import annotations

from collections import Counter

from treering.report.labels import value_words
from treering.report.numbers import plural
from treering.report.process_parts import Table, table, title_of
from treering.report.view import ReportView


def waiting(view: ReportView) -> Table:
    """Return the table of what is not verified yet."""
    rows = [(w["trial"], title_of(view, w.get("outcome")), w["why"]) for w in view.listed("waiting")]
    return table(
        "Waiting items",
        ("Trial", "Outcome", "Waits because"),
        rows,
        "Nothing waits.",
        "Results that are not verified yet stand in no analysis.",
    )


def waivers(view: ReportView) -> Table:
    """Return the table of what was let in on one reading."""
    rows = [
        (w["trial"], title_of(view, w["outcome"]), w["person"], w["reason"]) for w in view.listed("waivers")
    ]
    heads = ("Trial", "Outcome", "Waived by", "Reason")
    return table(
        "Waivers of the second reading",
        heads,
        rows,
        "No waiver: every result was read by two people.",
        "Each result here was let in on one reading, by a named person.",
    )


def verification(view: ReportView) -> Table:
    """Return the table of how results were verified."""
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
    return table(
        "How results were verified",
        ("Basis", "Results"),
        rows,
        "No verified result in the store.",
        "Two people read each result apart; a third settles what differs.",
        anchor="verification",
        after=after,
    )


def agreement(view: ReportView) -> Table:
    """Return the table of agreement of the readers by field."""
    rows = [
        (value_words(a["field"]), a["compared"], a["differed"]) for a in view.listed("agreement_by_field")
    ]
    return table(
        "Agreement of the two readers, by field",
        ("Field", "Compared", "Differed"),
        rows,
        "No number was read by two people yet.",
        "What differed was settled by a third person at the source.",
    )


def pairs(view: ReportView) -> Table:
    """Return the table of agreement of the readers by pair."""
    rows = [
        (f"{a['first']} and {a['second']}", a["compared"], a["differed"])
        for a in view.listed("agreement_by_pair")
    ]
    return table(
        "Agreement of the two readers, by pair",
        ("Readers", "Numbers compared", "Differed"),
        rows,
        "No pair of readers yet.",
        "Counted over the live verifications.",
    )


def third_readings(view: ReportView) -> Table:
    """Return the table of what a third person should read again."""
    rows = [
        (t["trial"], title_of(view, t["outcome"]), ", ".join(value_words(name) for name in t["fields"]))
        for t in view.listed("third_readings")
    ]
    return table(
        "To be read again by a third person",
        ("Trial", "Outcome", "Fields"),
        rows,
        "No agreed number is drawn for another reading.",
        "A share of the agreed numbers (by the protocol), drawn by a fixed rule, and every trial that a "
        "crossing rests on. They hold nothing back.",
    )
