"""A look that hangs on open readings is withheld: it spends nothing, and the plan's alpha still holds."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from treering.monitoring import MonitoringPlan, boundaries, next_look
from treering.synthesis.unresolved import before_withheld, withheld
from treering.terms import Verdict

PLAN = MonitoringPlan(effect=0.3, better="higher", spending="pocock", model="common", interval="wald")


def look(earlier: list[Any], estimates: list[float], share: float, version: int) -> Any:
    """Look at equal trials that together bring `share` of the required information."""
    variance = len(estimates) / (share * PLAN.required_information)
    return next_look(
        PLAN,
        earlier,
        date=f"2031-01-{version:02d}",
        version=version,
        trials=[f"T{i}" for i in range(len(estimates))],
        estimates=estimates,
        variances=[variance] * len(estimates),
    )


def test_the_look_after_a_withheld_one_has_the_boundary_of_a_first_look() -> None:
    first = look([], [0.5, 0.5], 0.5, 1)
    other = replace(first, verdict=Verdict.ACCRUING)
    assert first.verdict is Verdict.BENEFIT_CROSSED
    held = withheld(first, [], None, [first, other])
    assert (held.verdict, held.spends, held.alpha_spent) == (Verdict.CANNOT_BE_JUDGED, False, 0.0)
    second = look([held], [0.5, 0.5, 0.5], 1.0, 2)
    assert second.boundary == pytest.approx(look([], [0.5] * 3, 1.0, 2).boundary, rel=1e-12)
    assert second.boundary < look([first], [0.5] * 3, 1.0, 2).boundary
    assert before_withheld([first, held]) == [first]


def test_a_crossing_that_stands_or_does_not_hang_on_the_readings_is_not_withheld() -> None:
    first = look([], [0.5, 0.5], 0.5, 1)
    other = replace(first, verdict=Verdict.ACCRUING)
    assert withheld(first, [], None, [first, first]) is first
    assert withheld(first, [], None, []) is first
    assert withheld(first, [], Verdict.BENEFIT_CROSSED, [other]) is first
    assert withheld(other, [], None, [first]) is other


@pytest.mark.parametrize("kept_back", [0.0, 0.5, 1.0])
def test_alpha_holds_whatever_share_of_crossings_is_withheld(kept_back: float) -> None:
    # Seeded simulation without effect: two looks at fractions 0.5 and 1. Withheld crossings are judged at the
    # second look by the boundary of a first look.
    paths = 400_000
    rng = np.random.default_rng(20260112)
    first = rng.standard_normal(paths)
    second = np.abs(first + rng.standard_normal(paths)) / np.sqrt(2)
    planned = boundaries([0.5, 1.0], alpha=0.05, spending="pocock").z
    (late,) = boundaries([1.0], alpha=0.05, spending="pocock").z
    beyond = np.abs(first) > planned[0]
    held = beyond & (rng.random(paths) < kept_back)
    alarm = (beyond & ~held) | (held & (second > late)) | (~beyond & (second > planned[1]))
    error = np.sqrt(0.05 * 0.95 / paths)
    assert alarm.mean() < 0.05 + 3 * error
    assert (alarm.mean() > 0.05 - 3 * error) == (kept_back == 0.0)
