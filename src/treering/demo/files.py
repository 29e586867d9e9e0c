"""What the invented reviewers drop into the intake folder, as files a real team would write."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import dataclass
from typing import Any

from treering.demo.trials import InventedTrial

Record = dict[str, Any]


@dataclass(frozen=True)
class DemoFile:
    """One file that is dropped: its name and its text."""

    name: str
    text: str


def extraction(trial: InventedTrial, extractor: str, **changes: Any) -> Record:
    """Return one person's reading of one invented trial; `changes` replace fields of the main result."""
    main = {"outcome": "failed-first-attempt", **_counts(trial.failed), "locator": "table 2"} | changes
    results = [main]
    for outcome, means in (("pain", trial.pain), ("minutes-to-working-line", trial.minutes)):
        if means:
            results.append({"outcome": outcome, **_means(means), "locator": "table 3"})
    if trial.burns:
        results.append({"outcome": "skin-burns", **_counts(trial.burns), "locator": "table 4"})
    return {
        "record": "extraction",
        "trial": trial.id,
        "title": trial.title,
        "published": trial.published,
        "randomised": trial.randomised,
        "design": "parallel",
        "funding": "invented",
        "extractor": extractor,
        "report": {"id": f"{trial.id}-main", "form": "article", "citation": f"{trial.title}, main report"},
        "subgroups": {"setting": trial.setting},
        "results": results,
    }


def _counts(counts: tuple[int, int, int, int]) -> Record:
    names = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")
    return dict(zip(names, counts, strict=True))


def _means(means: tuple[float, float, int, float, float, int]) -> Record:
    names = (
        "intervention_mean",
        "intervention_sd",
        "intervention_total",
        "comparator_mean",
        "comparator_sd",
        "comparator_total",
    )
    return dict(zip(names, means, strict=True))


def risk_of_bias(trial: InventedTrial, day: str) -> Record:
    """Return two people's agreed judgement of the trial's main result."""
    names = ("randomisation", "deviations", "missing_data", "measurement", "selection")
    domains = dict.fromkeys(names, "Low")
    if trial.overall != "Low":
        domains[trial.weak_domain] = trial.overall
    support = dict.fromkeys((*names, "overall"), "invented for the demo")
    return {
        "record": "risk-of-bias judgement",
        "trial": trial.id,
        "outcome": "failed-first-attempt",
        "report": f"{trial.id}-main",
        "domains": domains,
        "overall": trial.overall,
        "support": support,
        "assessors": ["MV", "OK"],
        "date": day,
    }


def searches(day: str, hits: int, new_hits: int) -> DemoFile:
    """Return the week's log of two searches."""
    runs = [
        {
            "record": "search run",
            "source": source,
            "date": day,
            "strategy": "warm* AND (drip OR cannula*) (invented strategy)",
            "hits": number,
            "new_hits": fresh,
            "by": "IN",
        }
        for source, number, fresh in (("register A", hits, new_hits), ("database B", 3 * hits, new_hits))
    ]
    return as_json(f"search-{day}.json", runs)


def as_json(name: str, records: Record | list[Record]) -> DemoFile:
    """Write records as a JSON file."""
    return DemoFile(name, json.dumps(records, indent=2) + "\n")


def as_toml(name: str, record: Record) -> DemoFile:
    """Write one record as a TOML file: plain fields first, then tables, then lists of tables."""
    lines = [f"{field} = {json.dumps(value)}" for field, value in record.items() if _is_plain(value)]
    for field, value in record.items():
        if isinstance(value, dict):
            lines += ["", f"[{field}]", *(f"{name} = {json.dumps(item)}" for name, item in value.items())]
    for field, value in record.items():
        if isinstance(value, list) and value and isinstance(value[0], dict):
            for item in value:
                lines += ["", f"[[{field}]]", *(f"{name} = {json.dumps(v)}" for name, v in item.items())]
    return DemoFile(name, "\n".join(lines) + "\n")


def as_csv(name: str, record: Record) -> DemoFile:
    """Write an extraction as a CSV file: a row for each result."""
    study = ("trial", "title", "published", "randomised", "design", "funding", "extractor")
    rows = [
        {field: record[field] for field in study}
        | {"report": record["report"]["id"], "form": "article", "citation": record["report"]["citation"]}
        | {f"subgroup:{name}": level for name, level in record["subgroups"].items()}
        | result
        for result in record["results"]
    ]
    text = io.StringIO()
    writer = csv.DictWriter(
        text, list(dict.fromkeys(column for row in rows for column in row)), lineterminator="\n"
    )
    writer.writeheader()
    writer.writerows(rows)
    return DemoFile(name, text.getvalue())


def _is_plain(value: object) -> bool:
    return not isinstance(value, dict) and not (
        isinstance(value, list) and bool(value) and isinstance(value[0], dict)
    )


def both(trial: InventedTrial, day: str, **differently: Any) -> list[DemoFile]:
    """Return two people's files for one trial and the risk-of-bias judgement; the second may differ."""
    name = trial.id.lower()
    return [
        as_toml(f"{name}-MV.toml", extraction(trial, "MV")),
        as_csv(f"{name}-OK.csv", extraction(trial, "OK", **differently)),
        as_toml(f"{name}-bias.toml", risk_of_bias(trial, day)),
    ]
