"""An invented review in three versions, with numbers from the real pooling and boundary functions."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from treering import changes
from treering.effects import effect_sizes
from treering.monitoring import boundaries
from treering.pooling import pool
from treering.protocol import Protocol, read_protocol
from treering.report import build_view
from treering.terms import Verdict

# Invented trials of the hand-warming demo: events and totals, warmed then not warmed.
TRIALS: list[tuple[str, str, str, tuple[int, int, int, int], str | None]] = [
    ("brook-2029", "Brook 2029", "2029-03-02", (18, 96, 30, 98), "Low"),
    ("alder-2029", "Alder 2029", "2029-11-20", (25, 120, 33, 118), "Some concerns"),
    ("cedar-2030", "Cedar and others 2030", "2030-02-11", (9, 60, 12, 61), "Low"),
    ("dune-2030", "Dune 2030", "2030-08-01", (40, 150, 44, 149), "High"),
    ("elm-2031", "Elm 2031, a trial with a long name that must be cut", "2031-01-15", (22, 110, 34, 111), "Low"),
    ("fern-2031", "Fern 2031", "2031-03-09", (92, 480, 138, 478), None),
]


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


@dataclass
class Story:
    """An invented review that can be analysed at any of its versions."""

    protocol: Protocol
    looks: list[dict[str, Any]] = field(default_factory=list)

    def body(self, version: int, trials: list[str], *, left_out: dict[str, str] | None = None, **changed: Any) -> dict[str, Any]:
        """Return the analysis body of the main outcome with these trials."""
        outcome = self.protocol.outcomes[0]
        left_out = left_out or {}
        chosen = [t for t in TRIALS if t[0] in trials]
        values = {t[0]: changed.get(t[0], t[3]) for t in chosen}
        table = pd.DataFrame(
            list(values.values()),
            index=list(values),
            columns=["intervention_events", "intervention_total", "comparator_events", "comparator_total"],
        )
        effects = effect_sizes(table, outcome.measure)
        main = [t for t in values if t not in left_out]
        numbers = [effects.loc[main, name].to_numpy(float) for name in ("estimate", "variance")]
        pooled, common = pool(*numbers), pool(*numbers, model="common")
        weights = dict(zip(main, pooled.weights, strict=True))
        rows = []
        for trial, label, published, _, bias in chosen:
            y, se = float(effects.loc[trial, "estimate"]), math.sqrt(effects.loc[trial, "variance"])
            rows.append(
                {
                    "trial": trial,
                    "label": label,
                    "year": published[:4],
                    "published": published,
                    "report": f"{trial}-article",
                    "values": {k: int(v) for k, v in table.loc[trial].items()},
                    "intervention_total": int(table.loc[trial, "intervention_total"]),
                    "comparator_total": int(table.loc[trial, "comparator_total"]),
                    "estimate": y,
                    "standard_error": se,
                    "ci_low": y - 1.959964 * se,
                    "ci_high": y + 1.959964 * se,
                    "weight": float(weights[trial]) if trial in weights else None,
                    "in_main": trial not in left_out,
                    "status": "retracted" if trial in left_out else "included",
                    "left_out": left_out.get(trial),
                    "flags": ["retraction, 2031-05-02"] if trial in left_out else [],
                    "risk_of_bias": bias,
                    "basis": "waiver" if trial == "cedar-2030" else "agreed",
                    "imputed": False,
                    "subgroup": {"setting": "ward" if bias == "Low" else "clinic"},
                }
            )
        rows.sort(key=lambda row: (row["published"], row["trial"]))
        return {
            "synthesis": outcome.id,
            "title": outcome.title,
            "measure": str(outcome.measure),
            "scale": "log",
            "role": str(outcome.role),
            "better": str(outcome.better),
            "unit": "",
            "question": outcome.question,
            "mid": math.log(outcome.minimally_important),
            "comparator_risk": outcome.comparator_risk,
            "version": version,
            "k": len(main),
            "participants": sum(r["intervention_total"] + r["comparator_total"] for r in rows if r["in_main"]),
            "events": None,
            "trials": rows,
            "pooled": _pooled(pooled, "random effects, tau2 by REML, modified Knapp-Hartung interval"),
            "common": _pooled(common, "common effect, inverse variance"),
            "others": [{"name": "common effect", "k": common.k, **_ends(common), "tau2": 0.0, "note": ""}],
            "leave_one_out": [],
            "absolute": {"comparator_risk": 0.28, "per": 1000, "difference": -84.2, "low": -125.1, "high": -32.4},
            "sensitivity": [{"name": "low risk of bias only", "k": 2, **_ends(pooled), "note": ""}],
            "subgroups": [],
            "small_study": {"done": False, "why": f"{len(main)} trials; the test is read with ten or more only"},
            "bayes": None,
            "monitoring": self._monitoring(version, pooled, common, main),
            "warnings": [],
        }

    def _monitoring(self, version: int, pooled: Any, common: Any, main: list[str]) -> dict[str, Any]:
        """Append a look whose bounds come from the published spending function, and return the block."""
        plan = self.protocol.outcomes[0].monitoring
        assert plan is not None
        required = ((1.959964 + 1.281552) / math.log(plan.effect)) ** 2 / (1 - plan.diversity)
        information = 1 / common.standard_error**2
        fraction = information / required
        before = [look for look in self.looks if look["version"] < version]
        spends = fraction > max((look["fraction"] for look in before), default=0.0)
        drawn = boundaries([*(k["fraction"] for k in before if k["fraction"] < fraction), fraction])
        bound = float(drawn.z[-1])
        crossed = abs(pooled.z) > bound
        verdict = Verdict.BENEFIT_CROSSED if crossed else Verdict.ACCRUING
        if not spends:
            verdict = Verdict.NO_LONGER_SUPPORTED
        look = {
            "number": len(before) + 1,
            "date": f"2031-0{version + 1}-10",
            "version": version,
            "trials": main,
            "estimate": pooled.estimate,
            "standard_error": pooled.standard_error,
            "ci_low": pooled.ci_low,
            "ci_high": pooled.ci_high,
            "information": information,
            "required": required,
            "fraction": fraction,
            "required_reestimated": required * 1.1,
            "fraction_reestimated": fraction / 1.1,
            "diversity_reestimated": 0.27,
            "required_inflated": None,
            "z": pooled.z,
            "p": pooled.p,
            "spends": spends,
            "alpha_spent": float(drawn.alpha_spent[-1]),
            "boundary": bound if spends else None,
            "redrawn_boundary": None if spends else bound,
            "futility": None,
            "adjusted_low": pooled.estimate - bound * pooled.standard_error,
            "adjusted_high": pooled.estimate + bound * pooled.standard_error,
            "mixture_low": pooled.estimate - 3 * pooled.standard_error,
            "mixture_high": pooled.estimate + 3 * pooled.standard_error,
            "verdict": str(verdict),
            "plan_digest": "0" * 64,
            "remarks": [] if spends else ["Z is not beyond the boundary redrawn at the present fraction."],
        }
        self.looks = [*before, look]
        return {
            "plan": {
                "effect": math.log(plan.effect),
                "alpha": plan.alpha,
                "sides": plan.sides,
                "power": plan.power,
                "spending": str(plan.spending),
                "diversity": plan.diversity,
                "futility": False,
                "tau2": "reml",
                "model": "random",
                "interval": "modified-knapp-hartung",
                "better": "lower",
                "role": "benefit",
            },
            "look": look,
            "looks": list(self.looks),
            "hindsight": [
                {"date": "2029-03-02", "trial": "brook-2029", "fraction": 0.12, "z": -1.6, "boundary": 6.0},
                {"date": "2029-11-20", "trial": "alder-2029", "fraction": 0.25, "z": -1.9, "boundary": 4.3},
                {"date": "2030-08-01", "trial": "dune-2030", "fraction": 0.4, "z": -1.7, "boundary": 3.3},
            ],
            "opinions": [
                {"name": "Wald Z", "statistic": pooled.z, "threshold": bound, "crossed": crossed},
                {"name": "anytime-valid normal mixture", "statistic": 2.9, "threshold": 3.0, "crossed": not crossed},
            ],
            "agree": False,
            "rests_on": {
                "trials": [["fern-2031"]] if crossed else [],
                "tau2": 0.06 if crossed else None,
                "null_information": 31.0 if crossed else None,
                "text": "Without Fern 2031 the boundary is not crossed." if crossed else "Nothing is crossed.",
            },
            "total_alpha": 0.15,
            "inputs": {"observed comparator risk": 0.29, "minimum number of trials": 3},
        }


def _ends(pooled: Any) -> dict[str, float]:
    return {"estimate": pooled.estimate, "ci_low": pooled.ci_low, "ci_high": pooled.ci_high}


def _pooled(pooled: Any, method: str) -> dict[str, Any]:
    names = "standard_error z p tau2 tau2_low tau2_high q q_df q_p i2 h2 d2 prediction_low prediction_high k"
    values = {name: getattr(pooled, name) for name in names.split()}
    clean = {k: None if isinstance(v, float) and math.isnan(v) else v for k, v in values.items()}
    return {**_ends(pooled), **clean, "method": method}


def repool(synthesis: str, rows: Any) -> float | None:
    """Pool rows by the plan of the demo."""
    if not rows:
        return None
    return pool([r["estimate"] for r in rows], [r["standard_error"] ** 2 for r in rows]).estimate


@pytest.fixture
def protocol() -> Protocol:
    """The protocol of the invented demo."""
    return read_protocol(Path(__file__).parents[2] / "config" / "review.toml")


@pytest.fixture
def story(protocol: Protocol) -> Story:
    """An invented review."""
    return Story(protocol)


@pytest.fixture
def entries() -> type[StoredEntry]:
    """Make entries."""
    return StoredEntry


def _view_of(story: Story, version: int) -> Any:
    ids = [t[0] for t in TRIALS]
    name = story.protocol.outcomes[0].id
    bodies = [story.body(1, ids[:4]), story.body(2, ids)]
    bodies.append(story.body(3, ids, left_out={"fern-2031": "report retracted on 2031-05-02"}))
    now = [
        [StoredEntry("result", f"result/{t}/{name}", {"trial": t, "outcome": name}, i, cause="new trial") for i, t in enumerate(ids[:4])],
        [StoredEntry("result", f"result/{t}/{name}", {"trial": t, "outcome": name}, 40 + i, cause="new trial") for i, t in enumerate(ids[4:])],
        [StoredEntry("integrity notice", "integrity/fern-2031/2031-05-02/retraction",
                     {"trial": "fern-2031", "notice": "retraction", "reason": "retracted by the journal"}, 60)],
    ]  # fmt: skip
    body = bodies[version - 1]
    # The looks of a version are those up to it.
    body["monitoring"]["looks"] = [k for k in body["monitoring"]["looks"] if k["version"] <= version]
    before = {name: bodies[version - 2]} if version > 1 else None
    found = changes.compare(before, {name: body}, now[version - 1], ("0.1.0" if before else None, "0.1.0"), repool=repool)
    return build_view(
        protocol=story.protocol,
        version={
            "version": version,
            "date": f"2031-0{version + 1}-10",
            "previous": version - 1 or None,
            "causes": found[name]["causes"],
            "protocol_digest": story.protocol.digest(),
            "code_version": "0.1.0",
            "entries": 20 * version,
            "root": "ab" * 32,
        },
        store_head={"size": 20 * version, "root": "ab" * 32},
        analyses={name: body},
        previous_analyses=before,
        changes=found,
        status={"text": "living, searched to 2031-03-09; next version due 2031-03-17", "mode": "living"},
        waiting=[{"trial": "gorse-2031", "outcome": name, "why": "the two extractions differ in 2 fields"}],
        waivers=[{"trial": "cedar-2030", "outcome": name, "person": "SL", "reason": "second extractor on leave"}],
        integrity=[] if version < 3 else [{"trial": "fern-2031", "report": "fern-2031-article", "notice": "retraction",
                                           "link": "", "reason": "retracted by the journal", "seen_by": "IN", "date": "2031-05-02"}],
        searches=[{"source": "register A", "date": "2031-03-09", "strategy": "warm* AND drip*", "strategy_sha256": "c" * 64,
                   "hits": 12, "new_hits": 1, "error": None, "by": "IN"}],
        certainty=[{"outcome": name, "rating": "low", "reasons": {"imprecision": "wide interval"}, "raters": ["TR", "SL"],
                    "version": 1, "date": "2031-02-10", "numbers": {"k": 4, "ci_low": -0.5, "ci_high": 0.05}}],
        ongoing=[{"trial": "heath", "registration": "INVENTED-7", "planned": 400, "expected_end": "2031-12-01",
                  "status": "recruiting", "outcomes": [name]}],
        studies=[{"trial": "brook-2029", "title": "Brook 2029", "registration": "INVENTED-1", "randomised": 194,
                  "design": "parallel", "year": 2029, "funding": "none", "interests": "none"}],
        reports=[{"report": "brook-2029-article", "trial": "brook-2029", "form": "article", "citation": "Brook (invented) 2029",
                  "published": "2029-03-02", "identifier": ""}],
        verifications=[{"trial": "brook-2029", "outcome": name, "basis": "agreed", "extractors": ["MV", "OK"],
                        "fields": 4, "differences": [], "reread": True}],
    )  # fmt: skip


@pytest.fixture(params=[1, 2, 3])
def each_view(request: pytest.FixtureRequest, story: Story) -> Any:
    """The view of each version in turn."""
    return _view_of(story, request.param)


@pytest.fixture
def view_of(story: Story) -> Any:
    """Make the view of one version: 1 the base, 2 two new trials and a crossing, 3 a retraction."""
    return lambda version: _view_of(story, version)
