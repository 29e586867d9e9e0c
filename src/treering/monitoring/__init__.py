"""Sequential monitoring of a pooled effect that is honest about its looks."""

from treering.monitoring.boundaries import (
    Boundaries,
    NextBoundary,
    boundaries,
    boundaries_for_alpha,
    next_boundary,
    nominal_p,
)
from treering.monitoring.spending import PER_TAIL_CONVENTION, alpha_spent

__all__ = [
    "PER_TAIL_CONVENTION",
    "Boundaries",
    "NextBoundary",
    "alpha_spent",
    "boundaries",
    "boundaries_for_alpha",
    "next_boundary",
    "nominal_p",
]
