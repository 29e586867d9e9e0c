"""The proposed alpha holds the rate that the plan's own alpha does not."""

import json
from dataclasses import replace

import numpy as np
import pytest

from treering.errors import AnalysisError
from treering.monitoring.calibrate import calibrate, continued
from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.simulate import simulate


def wald_design(plan, tau2):
    sizes = np.resize([1.0, 3.0], 8)
    return SimulationDesign(information=tuple(sizes / sizes.sum() * plan.required_information), tau2=tau2)


def test_the_proposed_alpha_holds_the_rate_in_a_fresh_simulation():
    plan = MonitoringPlan(effect=0.3, interval="wald")
    design = wald_design(plan, (0.0, 0.05))
    found = calibrate(plan, design, reviews=6_000, workers=1)
    assert max(found.before) > 0.05 >= max(found.after)
    assert found.alpha < 0.05
    proposed = replace(plan, alpha=found.alpha)
    assert found.required == proposed.required_information
    fresh = simulate(
        proposed, continued(design, found.required), reviews=6_000, seed=99, effects=(0.0,), workers=1
    )
    assert fresh.worst.alarm == pytest.approx(0.05, abs=5 * fresh.worst.alarm_error)
    assert json.dumps(found.to_dict(), allow_nan=False)


def test_a_plan_that_holds_keeps_its_alpha():
    plan = MonitoringPlan(effect=0.3)
    found = calibrate(plan, wald_design(plan, (0.0,)), reviews=2_000, workers=1)
    assert (found.alpha, found.after) == (0.05, found.before)


def test_heterogeneity_that_no_alpha_can_carry_is_refused():
    plan = MonitoringPlan(effect=0.05, model="common")
    with pytest.raises(AnalysisError, match="No usable alpha"):
        calibrate(plan, wald_design(plan, (5.0,)), reviews=400, workers=1)


def test_a_design_is_continued_with_its_own_sizes_and_rhythm():
    design = SimulationDesign(information=(1.0, 2.0, 3.0), looks=(2, 3))
    longer = continued(design, 11.0)
    assert longer.information == (1.0, 2.0, 3.0, 1.0, 2.0, 3.0)
    assert longer.looks == (2, 3, 5, 6)
    assert continued(design, 6.0) == design
    with pytest.raises(AnalysisError, match="far too small"):
        continued(design, 1e6)
