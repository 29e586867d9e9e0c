"""Entries and analysis bodies as small as a comparison needs them; every trial is invented."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import pytest


@dataclass
class StoredEntry:
    """What a stored entry looks like from outside the store."""

    kind: str
    key: str
    seq: int
    body: dict[str, Any] = field(default_factory=dict)
    cause: str | None = None
    reason: str | None = None
    replaces: int | None = None


def row(trial: str, estimate: float | None, variance: float = 1.0, **other: Any) -> dict[str, Any]:
    """One trial row of an analysis body."""
    error = None if estimate is None else variance**0.5
    base = {"trial": trial, "label": trial.title(), "published": "2030-01-01", "estimate": estimate}
    return {**base, "standard_error": error, "in_main": True, "left_out": None, "values": {}, **other}


def mean(rows: Sequence[dict[str, Any]]) -> float | None:
    """Inverse-variance mean: the closed form the split is checked against."""
    if not rows:
        return None
    weights = [1 / r["standard_error"] ** 2 for r in rows]
    return sum(w * r["estimate"] for w, r in zip(weights, rows, strict=True)) / sum(weights)


def body(rows: Sequence[dict[str, Any]], estimate: float | None = None, **other: Any) -> dict[str, Any]:
    """An analysis body whose pooled estimate is the inverse-variance mean, unless another is given."""
    pooled = mean([r for r in rows if r["in_main"]]) if estimate is None else estimate
    value = None if pooled is None else {"estimate": pooled, "ci_low": pooled - 1, "ci_high": pooled + 1}
    base = {"measure": "risk-ratio", "scale": "log", "mid": -0.2, "trials": list(rows), "pooled": value}
    return {**base, "monitoring": None, **other}


class Kit:
    """The builders above, for tests."""

    entry = StoredEntry
    row = staticmethod(row)
    body = staticmethod(body)
    mean = staticmethod(mean)


@pytest.fixture(scope="session")
def kit() -> Kit:
    """Builders of entries, rows and bodies."""
    return Kit()
