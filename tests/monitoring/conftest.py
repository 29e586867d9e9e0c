"""Shared helpers of the ledger tests: a review whose Z and fraction can be set to the digit."""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from treering.monitoring.ledger import next_look
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan


@dataclass
class Review:
    """An invented review under a common-effect Wald plan: Z = sum(w y) / sqrt(sum w), exactly.

    `trials` holds name -> (information as a fraction of the required one, own Z).
    """

    plan: MonitoringPlan
    trials: dict[str, tuple[float, float]] = field(default_factory=dict)
    looks: list[Look] = field(default_factory=list)

    def look(self, *, version: int | None = None, date: str | None = None, **more: object) -> Look:
        """Look at the trials as they stand and append the row."""
        number = len(self.looks) + 1
        info = [share * self.plan.required_information for share, _ in self.trials.values()]
        row = next_look(
            self.plan,
            self.looks,
            date=date or f"2031-01-{number:02d}",
            version=version or number,
            trials=list(self.trials),
            estimates=[z / math.sqrt(i) for (_, z), i in zip(self.trials.values(), info, strict=True)],
            variances=[1.0 / i for i in info],
            **more,
        )
        self.looks.append(row)
        return row

    def add(self, name: str, share: float, total_z: float) -> Look:
        """Add a trial that brings the pooled Z to `total_z`, and look."""
        before = math.sqrt(sum(s for s, _ in self.trials.values()))
        score = sum(math.sqrt(s) * z for s, z in self.trials.values())
        after = math.sqrt(before**2 + share)
        self.trials[name] = (share, (total_z * after - score) / math.sqrt(share))
        return self.look()

    def remove(self, *names: str) -> Look:
        """Take trials out, and look."""
        for name in names:
            del self.trials[name]
        return self.look()


@pytest.fixture
def review() -> Callable[..., Review]:
    """Return a maker of reviews; better is higher, so that a positive Z is a benefit."""

    def make(trials: Mapping[str, tuple[float, float]] | None = None, **plan: object) -> Review:
        fields = {"effect": 0.3, "better": "higher", "model": "common"} | plan
        return Review(MonitoringPlan(**fields), dict(trials or {}))

    return make


@pytest.fixture
def verdicts() -> Callable[[Sequence[Look]], list[str]]:
    """Return a reader of the verdicts of some looks."""
    return lambda looks: [str(look.verdict) for look in looks]


@pytest.fixture(scope="session")
def published() -> dict[str, Any]:
    """Published and formula values with source and tolerance, by case (tests/published/monitoring.json)."""
    path = Path(__file__).parents[1] / "published" / "monitoring.json"
    cases: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))["cases"]
    return cases


@pytest.fixture(scope="session")
def agrees() -> Callable[[Mapping[str, Any], Mapping[str, float]], None]:
    """Return a check that every expected figure of a case is met within its own tolerance."""

    def check(case: Mapping[str, Any], found: Mapping[str, float]) -> None:
        assert set(found) == set(case["expected"])
        for name, value in case["expected"].items():
            assert found[name] == pytest.approx(value, abs=case["tolerance"][name] or 1e-15), name

    return check
