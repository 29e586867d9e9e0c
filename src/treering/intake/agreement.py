"""How often two readers agree, by field and by pair of readers: what the store's verifications say. Pure."""

from __future__ import annotations

from collections import Counter
from typing import Any

from treering.intake.view import StateView
from treering.records import VALUE_FIELDS
from treering.terms import EntryKind


def agreement(view: StateView) -> dict[str, list[dict[str, Any]]]:
    """Count compared and differing numbers over the live verifications that rest on two readings.

    Parameters
    ----------
    view : StateView
        The state of the store.

    Returns
    -------
    dict
        ``fields``: field, compared, differed, in the order of the form; ``pairs``: first, second, compared,
        differed, by name. A number within the protocol's tolerance counts as agreed.
    """
    compared: Counter[str] = Counter()
    differed: Counter[str] = Counter()
    pair_compared: Counter[tuple[str, str]] = Counter()
    pair_differed: Counter[tuple[str, str]] = Counter()
    for entry in view.live(EntryKind.VERIFICATION):
        body = entry.body
        if body["basis"] == "waiver":
            continue
        agreed = set(body["agreed"])
        wrong = {d["field"] for d in body["differences"]} & set(VALUE_FIELDS) - agreed
        pair = (str(body["extractors"][0]), str(body["extractors"][1]))
        compared.update(agreed | wrong)
        differed.update(wrong)
        pair_compared[pair] += len(agreed | wrong)
        pair_differed[pair] += len(wrong)
    return {
        "fields": [
            {"field": name, "compared": compared[name], "differed": differed[name]}
            for name in VALUE_FIELDS
            if compared[name]
        ],
        "pairs": [
            {"first": pair[0], "second": pair[1], "compared": number, "differed": pair_differed[pair]}
            for pair, number in sorted(pair_compared.items())
        ],
    }
