"""One trial to an estimate and its variance on the analysis scale."""

from treering.effects.arms import arm_ledger, arm_uses
from treering.effects.baseline import change_from_baseline, correlation_from_change
from treering.effects.cluster import design_effect, effective_numbers, effective_table, inflated_variance
from treering.effects.continuous import small_sample_factor
from treering.effects.conversions import (
    log_odds_ratio_from_smd,
    smd_from_log_odds_ratio,
    standard_error_from_interval,
    standard_error_from_p,
    z_from_p,
)
from treering.effects.crossover import (
    paired_log_odds_ratio,
    paired_mean_difference,
    paired_standardized_mean_difference,
)
from treering.effects.deviations import sd_from_interval, sd_from_standard_error
from treering.effects.difference_deviations import (
    sd_from_difference_interval,
    sd_from_difference_standard_error,
    sd_from_p,
    sd_from_t,
)
from treering.effects.multiarm import combine_binary, combine_continuous, split_shared_comparator
from treering.effects.record import Conversion
from treering.effects.rows import LeftOut
from treering.effects.summaries import Skewness, expected_range, mean_and_sd_from_summary, skewness_check
from treering.effects.table import effect_sizes, usable
from treering.effects.time_to_event import log_rank_variance, log_rank_variance_by_allocation
from treering.effects.usual import usual_measure
from treering.effects.zero_cells import corrected_counts

__all__ = [
    "Conversion",
    "LeftOut",
    "Skewness",
    "arm_ledger",
    "arm_uses",
    "change_from_baseline",
    "combine_binary",
    "combine_continuous",
    "corrected_counts",
    "correlation_from_change",
    "design_effect",
    "effect_sizes",
    "effective_numbers",
    "effective_table",
    "expected_range",
    "inflated_variance",
    "log_odds_ratio_from_smd",
    "log_rank_variance",
    "log_rank_variance_by_allocation",
    "mean_and_sd_from_summary",
    "paired_log_odds_ratio",
    "paired_mean_difference",
    "paired_standardized_mean_difference",
    "sd_from_difference_interval",
    "sd_from_difference_standard_error",
    "sd_from_interval",
    "sd_from_p",
    "sd_from_standard_error",
    "sd_from_t",
    "skewness_check",
    "small_sample_factor",
    "smd_from_log_odds_ratio",
    "split_shared_comparator",
    "standard_error_from_interval",
    "standard_error_from_p",
    "usable",
    "usual_measure",
    "z_from_p",
]
