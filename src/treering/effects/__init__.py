"""One trial to an estimate and its variance on the analysis scale."""

from treering.effects.continuous import small_sample_factor
from treering.effects.rows import LeftOut
from treering.effects.table import effect_sizes, usable
from treering.effects.time_to_event import log_rank_variance, log_rank_variance_by_allocation
from treering.effects.zero_cells import corrected_counts

__all__ = [
    "LeftOut",
    "corrected_counts",
    "effect_sizes",
    "log_rank_variance",
    "log_rank_variance_by_allocation",
    "small_sample_factor",
    "usable",
]
