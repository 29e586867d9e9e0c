"""An invented review in three versions, with numbers from the real effect, pooling and monitoring functions.

Every trial, person and date here is invented. Version 1 is the base, version 2 brings two trials and a
crossing, version 3 a correction and a retraction after which the crossing is no longer supported.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from treering import changes
from treering.effects import effect_sizes
from treering.monitoring import Look, MonitoringPlan, hindsight, next_look, rests_on, second_opinions
from treering.pooling import pool
from treering.protocol import Outcome, Protocol, read_protocol
from treering.report import ReportView, build_view
from treering.terms import CROSSED

COUNTS = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")
MEANS = tuple(f"{arm}_{what}" for arm in ("intervention", "comparator") for what in ("mean", "sd", "total"))
MAIN, PAIN, MINUTES, BURNS = "failed-first-attempt", "pain", "minutes-to-working-line", "skin-burns"

#: Invented: trial, label, published, risk of bias.
TRIALS = (
    ("brook", "Brook 2029", "2029-03-02", "Low"),
    ("alder", "Alder 2029", "2029-11-20", "Some concerns"),
    ("cedar", "Cedar and others 2030", "2030-02-11", "Low"),
    ("dune", "Dune 2030", "2030-08-01", "High"),
    ("elm", "Elm 2031, a trial with a long name that must be cut", "2031-01-15", "Low"),
    ("fern", "Fern 2031", "2031-02-09", None),
)
VALUES: dict[str, dict[str, Sequence[float]]] = {
    MAIN: {
        "brook": (18, 96, 30, 98),
        "alder": (25, 120, 33, 118),
        "cedar": (9, 60, 12, 61),
        "dune": (40, 150, 44, 149),
        "elm": (22, 110, 34, 111),
        "fern": (86, 480, 138, 478),
    },
    PAIN: {
        "brook": (3.1, 2.1, 96, 3.9, 2.2, 98),
        "cedar": (4.0, 2.3, 60, 4.2, 2.2, 61),
        "elm": (2.9, 2.0, 110, 3.8, 2.1, 111),
    },
    MINUTES: {"alder": (6.8, 3.9, 120, 8.1, 4.4, 118)},
    BURNS: {
        "brook": (1, 96, 2, 98),
        "alder": (0, 120, 0, 118),
        "dune": (1, 150, 1, 149),
        "fern": (3, 480, 2, 478),
    },
}
DATES = {1: "2030-09-10", 2: "2031-03-10", 3: "2031-05-10"}
KNOWN = {
    1: ("brook", "alder", "cedar", "dune"),
    2: tuple(t[0] for t in TRIALS),
    3: tuple(t[0] for t in TRIALS),
}
RETRACTED = "report retracted on 2031-05-02"


@dataclass
class StoredEntry:
    """What a stored entry looks like from outside the store."""

    kind: str
    key: str
    body: dict[str, Any]
    seq: int
    cause: str | None = None
    reason: str | None = None
    replaces: int | None = None
    by: str = "treering"
    true_at: str = "2031-04-01"
    known_at: str = "2031-04-01T06:00:00Z"


def plan_of(outcome: Outcome) -> MonitoringPlan | None:
    """The monitoring plan on the analysis scale."""
    m = outcome.monitoring
    if m is None:
        return None
    return MonitoringPlan(
        effect=outcome.on_analysis_scale(m.effect), better=outcome.better, role=outcome.role, alpha=m.alpha,
        sides=m.sides, power=m.power, spending=m.spending, diversity=m.diversity, model=outcome.pooling.model,
    )  # fmt: skip


def analysis(outcome: Outcome, version: int, looks: list[Look]) -> dict[str, Any]:
    """Analyse one outcome of one version; appends its look to `looks`."""
    values = {t: v for t, v in VALUES[outcome.id].items() if t in KNOWN[version]}
    if version == 3 and outcome.id == MAIN:
        values = values | {"cedar": (9, 60, 14, 61)}
    table = pd.DataFrame(
        list(values.values()),
        index=list(values),
        columns=list(COUNTS if len(values["alder" if "alder" in values else "brook"]) == 4 else MEANS),
    )
    effects = effect_sizes(table, outcome.measure)
    reasons = {row.trial: row.reason for row in effects.attrs.get("left_out", ())}
    if version == 3 and "fern" in values:
        reasons["fern"] = RETRACTED
    facts = {t[0]: t for t in TRIALS}
    ids = sorted(values, key=lambda t: (facts[t][2], t))
    main = [t for t in ids if t not in reasons]
    y, v = (effects.loc[main, name].to_numpy(float) for name in ("estimate", "variance"))
    planned = pool(y, v) if len(main) > 1 else pool(y, v, interval="wald")
    common = pool(y, v, model="common", interval="wald")
    weights = dict(zip(main, planned.weights, strict=True))
    rows = [
        _row(facts[t], dict(table.loc[t].items()), effects.loc[t], weights.get(t), reasons.get(t))
        for t in ids
    ]
    ratio = outcome.is_ratio
    return {
        "synthesis": outcome.id,
        "version": version,
        "title": outcome.title,
        "question": outcome.question,
        "measure": str(outcome.measure),
        "scale": "log" if ratio else "plain",
        "role": str(outcome.role),
        "better": str(outcome.better),
        "unit": outcome.unit,
        "mid": outcome.on_analysis_scale(outcome.minimally_important),
        "comparator_risk": outcome.comparator_risk,
        "k": len(main),
        "participants": sum(r["intervention_total"] + r["comparator_total"] for r in rows if r["in_main"]),
        "participants_unknown": 0,
        "events": None,
        "trials": rows,
        "pooled": _pooled(planned, "random effects, tau2 by REML, modified Knapp-Hartung interval"),
        "common": _pooled(common, "common effect, inverse variance"),
        "others": [{"name": "common effect", "k": common.k, **_ends(common), "tau2": 0.0, "note": ""}],
        "leave_one_out": [],
        "absolute": _absolute(outcome, planned),
        "sensitivity": [{"name": "low risk of bias only", "k": 2, **_ends(common), "tau2": 0.0, "note": ""}],
        "subgroups": [{"name": "setting", "planned": True, "levels": [], "without_level": 0, "q": None,
                       "q_df": None, "p": None, "why": "fewer than two levels with trials"}],
        "small_study": {"done": False, "why": f"{len(main)} trials; the test is read with ten or more only"},
        "bayes": None,
        "monitoring": _monitoring(outcome, version, looks, main, y, v, facts),
        "warnings": list(planned.remarks),
    }  # fmt: skip


def _row(
    facts: tuple[str, str, str, str | None],
    values: dict[Any, Any],
    effect: Any,
    weight: Any,
    reason: str | None,
) -> dict[str, Any]:
    trial, label, published, bias = facts
    y = float(effect["estimate"])
    known = math.isfinite(y)
    se = math.sqrt(effect["variance"]) if known else None
    return {
        "trial": trial,
        "label": label,
        "year": published[:4],
        "published": published,
        "report": f"{trial}-article",
        "values": {str(k): int(x) if float(x).is_integer() else float(x) for k, x in values.items()},
        "intervention_total": int(values["intervention_total"]),
        "comparator_total": int(values["comparator_total"]),
        "estimate": y if known else None,
        "standard_error": se,
        "ci_low": y - 1.959964 * se if se else None,
        "ci_high": y + 1.959964 * se if se else None,
        "weight": None if weight is None else float(weight),
        "in_main": reason is None,
        "status": "retracted" if reason == RETRACTED else "included",
        "left_out": reason,
        "flags": ["retraction, 2031-05-02"] if reason == RETRACTED else [],
        "risk_of_bias": bias,
        "basis": "waiver" if trial == "cedar" else "agreed",
        "imputed": False,
        "subgroup": {},
    }


def _absolute(outcome: Outcome, planned: Any) -> dict[str, Any] | None:
    """Per 1000 people for a risk ratio: risk times (ratio - 1)."""
    if outcome.id != MAIN or outcome.comparator_risk is None:
        return None
    per = {k: 1000 * outcome.comparator_risk * math.expm1(x) for k, x in _ends(planned).items()}
    return {
        "comparator_risk": outcome.comparator_risk,
        "per": 1000,
        "difference": per["estimate"],
        "low": per["ci_low"],
        "high": per["ci_high"],
        "why": "",
    }


def _monitoring(
    outcome: Outcome, version: int, looks: list[Look], main: list[str], y: Any, v: Any, facts: Any
) -> dict[str, Any] | None:
    plan = plan_of(outcome)
    if plan is None:
        return None
    if not (looks and list(looks[-1].trials) == main):
        looks.append(
            next_look(
                plan, looks, date=DATES[version], version=version, trials=main, estimates=y, variances=v
            )
        )
    curve = hindsight(
        plan, dates=[facts[t][2] for t in main], trials=main, estimates=y, variances=v
    ).to_dict()
    strip = second_opinions(plan, looks, y, v)
    rests = rests_on(plan, looks, main, y, v).to_dict() if looks[-1].verdict in CROSSED else None
    return {
        "plan": plan.to_dict(),
        "inputs": {"information_per_participant": 0.07, "amendments": []},
        "total_alpha": 0.15,
        "look": looks[-1].to_dict(),
        "looks": [look.to_dict() for look in looks],
        "hindsight": [point | {"trial": ", ".join(point["trials"])} for point in curve["points"]],
        "opinions": [opinion.to_dict() for opinion in strip.opinions],
        "agree": strip.agree,
        "rests_on": rests,
        "minimum_trials": 3,
    }


def _ends(pooled: Any) -> dict[str, float]:
    return {"estimate": pooled.estimate, "ci_low": pooled.ci_low, "ci_high": pooled.ci_high}


def _pooled(pooled: Any, method: str) -> dict[str, Any]:
    names = "standard_error z p tau2 tau2_low tau2_high q q_df q_p i2 h2 d2 prediction_low prediction_high k"
    values = {name: getattr(pooled, name) for name in names.split()}
    clean = {k: None if isinstance(x, float) and math.isnan(x) else x for k, x in values.items()}
    return {**_ends(pooled), **clean, "method": method}


def repool(synthesis: str, rows: Sequence[Any]) -> float | None:
    """Pool rows by the plan of the demo."""
    if not rows:
        return None
    method = "modified-knapp-hartung" if len(rows) > 1 else "wald"
    return pool(
        [r["estimate"] for r in rows], [r["standard_error"] ** 2 for r in rows], interval=method
    ).estimate


def _entries(version: int) -> list[StoredEntry]:
    if version == 3:
        return [
            StoredEntry("result", f"result/cedar/{MAIN}", {"trial": "cedar", "outcome": MAIN}, 60, replaces=3,
                        reason="erratum of 2031-04-20"),
            StoredEntry("integrity notice", "integrity/fern/2031-05-02/retraction",
                        {"trial": "fern", "notice": "retraction", "reason": "retracted by the journal"}, 61),
        ]  # fmt: skip
    before = KNOWN.get(version - 1, ())
    fresh = [
        (t, o) for o, values in VALUES.items() for t in values if t in KNOWN[version] and t not in before
    ]
    return [
        StoredEntry(
            "result", f"result/{t}/{o}", {"trial": t, "outcome": o}, 30 * version + i, cause="new trial"
        )
        for i, (t, o) in enumerate(fresh)
    ]


def make_view(protocol: Protocol, version: int) -> ReportView:
    """The view of one version."""
    history: dict[int, dict[str, Any]] = {}
    looks: dict[str, list[Look]] = {o.id: [] for o in protocol.outcomes}
    for v in range(1, version + 1):
        history[v] = {o.id: analysis(o, v, looks[o.id]) for o in protocol.outcomes}
    before = history.get(version - 1)
    codes = ("0.1.0" if before else None, "0.1.0")
    found = changes.compare(before, history[version], _entries(version), codes, repool=repool)
    return build_view(
        protocol=protocol,
        version={
            "version": version,
            "date": DATES[version],
            "previous": version - 1 or None,
            "causes": sorted({cause for body in found.values() for cause in body["causes"]}),
            "protocol_digest": protocol.digest(),
            "code_version": "0.1.0",
            "entries": 20 * version,
            "root": "ab" * 32,
        },
        store_head={"size": 20 * version, "root": "ab" * 32},
        analyses=history[version],
        previous_analyses=before,
        changes=found,
        status={"date": DATES[version], "searches": {"register A": "2031-03-09"}, "waiting": 1,
                "planned_sources": {"register A": 7, "database B": 14}, "update_every_days": 7},
        waiting=[{"trial": "gorse", "outcome": MAIN, "why": "the two extractions differ in 2 fields"}],
        waivers=[{"trial": "cedar", "outcome": MAIN, "person": "SL", "reason": "second extractor on leave"}],
        integrity=[] if version < 3 else [
            {"trial": "fern", "report": "fern-article", "notice": "retraction", "link": "",
             "reason": "retracted by the journal", "seen_by": "IN", "true_at": "2031-05-02"}],
        searches=[{"source": "register A", "date": "2031-03-09", "strategy": "warm* AND drip*",
                   "strategy_sha256": "c" * 64, "hits": 12, "new_hits": 1, "error": None, "by": "IN"}],
        certainty=[{"outcome": MAIN, "rating": "low", "reasons": {"imprecision": "wide interval"},
                    "raters": ["TR", "SL"], "version": 1, "date": "2030-09-20",
                    "numbers": {"k": 4, "ci_low": -0.5, "ci_high": 0.05}}],
        ongoing=[{"trial": "heath", "registration": "INVENTED-7", "planned": 400, "outcomes": [MAIN],
                  "expected_end": "2031-12-01", "status": "recruiting"}],
        studies=[{"trial": "brook", "title": "Brook 2029", "registration": "INVENTED-1", "randomised": 194,
                  "design": "parallel", "year": 2029, "funding": "none", "interests": "none"}],
        reports=[{"report": "brook-article", "trial": "brook", "form": "article",
                  "citation": "Brook (invented) 2029", "published": "2029-03-02", "identifier": ""}],
        bias=[{"trial": "alder", "outcome": MAIN, "report": "alder-article", "overall": "Some concerns",
               "domains": {"randomisation": "Low", "deviations": "Some concerns", "missing_data": "Low",
                           "measurement": "Low", "selection": "Low"},
               "support": {"deviations": "the carers knew"}, "assessors": ["MV", "OK"]}],
        screening=[{"report": "gale-letter", "trial": None, "decision": "exclude", "reason": "no comparator",
                    "voters": ["MV", "OK"]}],
        verifications=[{"trial": "brook", "outcome": MAIN, "basis": "agreed", "extractors": ["MV", "OK"],
                        "fields": 4, "differences": [], "reread": True}],
    )  # fmt: skip


@pytest.fixture(scope="session")
def protocol() -> Protocol:
    """The protocol of the invented demo."""
    return read_protocol(Path(__file__).parents[2] / "config" / "review.toml")


@pytest.fixture(scope="session")
def views(protocol: Protocol) -> dict[int, ReportView]:
    """The views of the three versions."""
    return {version: make_view(protocol, version) for version in DATES}


@pytest.fixture
def view_of(views: dict[int, ReportView]) -> Callable[[int], ReportView]:
    """Return the view of one version: 1 the base, 2 a crossing, 3 a retraction."""
    return views.__getitem__
