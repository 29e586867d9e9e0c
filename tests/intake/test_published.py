"""Published trials go through the intake unharmed: 13 BCG trials give the published pooled result."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import pandas as pd

from treering.effects import effect_sizes
from treering.pooling import pool
from treering.terms import EntryKind

BCG = Path(__file__).parent.parent / "published" / "bcg_colditz_1994.json"
COUNTS = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")


def test_thirteen_published_trials_pool_as_published(review) -> None:
    """Colditz et al. 1994, JAMA 271:698; common effect -0.4303, SE 0.0405, Q 152.23 (widely reprinted)."""
    published = json.loads(BCG.read_text())
    assert (
        review.update({f"{who}.csv": _table(published["trials"], who) for who in ("MV", "OK")}).waiting == ()
    )
    results = review.ledger.live(EntryKind.RESULT)
    table = pd.DataFrame([e.body["values"] for e in results], index=[e.body["trial"] for e in results])
    found = effect_sizes(table, "risk-ratio")
    pooled = pool(found["estimate"], found["variance"], model="common")
    expected, tolerance = published["expected"]["common"], published["tolerance"]
    for name, value in expected.items():
        assert abs(getattr(pooled, name) - value) < tolerance[name], name
    years = {e.body["trial"]: e.body["year"] for e in review.ledger.live(EntryKind.STUDY)}
    assert years == {row[0]: row[1] for row in published["trials"]}


def _table(trials: list[list], who: str) -> str:
    text = io.StringIO()
    columns = ("trial", "year", "report", "extractor", "outcome", *COUNTS, "locator")
    writer = csv.writer(text)
    writer.writerow(columns)
    for trial, year, *counts in trials:
        writer.writerow(
            [trial, year, f"{trial}-report", who, "failed-first-attempt", *counts, "Colditz 1994"]
        )
    return text.getvalue()
