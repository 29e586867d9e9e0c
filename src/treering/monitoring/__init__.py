"""Sequential monitoring of a pooled effect that is honest about its looks."""

from treering.monitoring.boundaries import (
    Boundaries,
    NextBoundary,
    boundaries,
    boundaries_for_alpha,
    next_boundary,
    nominal_p,
)
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.spending import PER_TAIL_CONVENTION, alpha_spent

__all__ = [
    "PER_TAIL_CONVENTION",
    "Boundaries",
    "Look",
    "MonitoringPlan",
    "NextBoundary",
    "alpha_spent",
    "boundaries",
    "boundaries_for_alpha",
    "next_boundary",
    "nominal_p",
]
