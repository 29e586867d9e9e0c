"""Sequential monitoring of a pooled effect that is honest about its looks."""

from treering.monitoring.anytime import (
    iterated_logarithm_z,
    log_e_product,
    log_e_value,
    mixture_interval,
)
from treering.monitoring.boundaries import (
    Boundaries,
    NextBoundary,
    boundaries,
    boundaries_for_alpha,
    next_boundary,
    nominal_p,
)
from treering.monitoring.calibrate import Calibration, calibrate
from treering.monitoring.calibrate import continued as continued_design
from treering.monitoring.crossing import Crossing, conditional_crossing, crossing_probabilities
from treering.monitoring.dependence import RestsOn, rests_on
from treering.monitoring.design import BinaryTrials, SimulationDesign
from treering.monitoring.finding import LedgerState
from treering.monitoring.forecast import Forecast, ForecastStep, OngoingTrial, forecast
from treering.monitoring.futility import FutilityBoundaries, futility_boundaries, next_futility_bound
from treering.monitoring.hindsight import HindsightCurve, hindsight
from treering.monitoring.inference import (
    StagewiseEstimate,
    conditional_power,
    median_unbiased,
    predictive_power,
    repeated_interval,
    stagewise_p,
    trend_drift,
)
from treering.monitoring.information import (
    detection_constant,
    minimum_trials,
    required_events,
    required_information,
)
from treering.monitoring.ledger import holds_new_data, ledger_state, next_look
from treering.monitoring.look import Look
from treering.monitoring.next_trial import NextTrial, next_trial
from treering.monitoring.opinions import Opinion, OpinionStrip, second_opinions
from treering.monitoring.participants import (
    events_for_information,
    information_per_participant,
    intervention_risk,
    required_participants,
)
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.simulate import simulate
from treering.monitoring.simulation_result import SimulatedRule, SimulationResult
from treering.monitoring.spending import PER_TAIL_CONVENTION, alpha_spent, beta_spent
from treering.monitoring.table import BoundaryTable, DetectableEffect, boundary_table

__all__ = [
    "PER_TAIL_CONVENTION",
    "BinaryTrials",
    "Boundaries",
    "BoundaryTable",
    "Calibration",
    "Crossing",
    "DetectableEffect",
    "Forecast",
    "ForecastStep",
    "FutilityBoundaries",
    "HindsightCurve",
    "LedgerState",
    "Look",
    "MonitoringPlan",
    "NextBoundary",
    "NextTrial",
    "OngoingTrial",
    "Opinion",
    "OpinionStrip",
    "RestsOn",
    "SimulatedRule",
    "SimulationDesign",
    "SimulationResult",
    "StagewiseEstimate",
    "alpha_spent",
    "beta_spent",
    "boundaries",
    "boundaries_for_alpha",
    "boundary_table",
    "calibrate",
    "conditional_crossing",
    "conditional_power",
    "continued_design",
    "crossing_probabilities",
    "detection_constant",
    "events_for_information",
    "forecast",
    "futility_boundaries",
    "hindsight",
    "holds_new_data",
    "information_per_participant",
    "intervention_risk",
    "iterated_logarithm_z",
    "ledger_state",
    "log_e_product",
    "log_e_value",
    "median_unbiased",
    "minimum_trials",
    "mixture_interval",
    "next_boundary",
    "next_futility_bound",
    "next_look",
    "next_trial",
    "nominal_p",
    "predictive_power",
    "repeated_interval",
    "required_events",
    "required_information",
    "required_participants",
    "rests_on",
    "second_opinions",
    "simulate",
    "stagewise_p",
    "trend_drift",
]
