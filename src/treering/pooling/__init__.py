"""Many trials pooled into one effect.

The numeric core: arrays or pandas in, frozen values out, effects on the analysis scale.
"""

from treering.pooling.absolute import AbsoluteEffect, absolute_effects, distance
from treering.pooling.analyse import analyse_table
from treering.pooling.analysis_result import TableAnalysis
from treering.pooling.bayes import BayesianEffect, pool_bayesian
from treering.pooling.credibility import SUBGROUP_QUESTIONS, SubgroupAnswer, SubgroupCredibility
from treering.pooling.inference import heterogeneity_p
from treering.pooling.influence import cumulative, influence, leave_one_out
from treering.pooling.interaction import Interaction, interaction_test
from treering.pooling.inverse_variance import pool, pool_many
from treering.pooling.mantel_haenszel import ChiSquare, cochran_mantel_haenszel, pool_mantel_haenszel
from treering.pooling.one_stage import OneStageEffect, pool_one_stage
from treering.pooling.one_stage_models import OneStageModel
from treering.pooling.peto import pool_peto
from treering.pooling.priors import (
    EMPIRICAL_PRIORS,
    HalfCauchy,
    HalfNormal,
    LogNormal,
    LogStudent,
    read_prior,
    tau_prior,
)
from treering.pooling.regression import MetaRegression, meta_regression
from treering.pooling.result import PooledEffect
from treering.pooling.small_study import RankTest, RegressionTest, egger, harbord, peters, rank_correlation
from treering.pooling.subgroups import SubgroupAnalysis, SubgroupEffect, subgroup_analysis
from treering.pooling.trim_fill import TrimAndFill, trim_and_fill

__all__ = [
    "EMPIRICAL_PRIORS",
    "SUBGROUP_QUESTIONS",
    "AbsoluteEffect",
    "BayesianEffect",
    "ChiSquare",
    "HalfCauchy",
    "HalfNormal",
    "Interaction",
    "LogNormal",
    "LogStudent",
    "MetaRegression",
    "OneStageEffect",
    "OneStageModel",
    "PooledEffect",
    "RankTest",
    "RegressionTest",
    "SubgroupAnalysis",
    "SubgroupAnswer",
    "SubgroupCredibility",
    "SubgroupEffect",
    "TableAnalysis",
    "TrimAndFill",
    "absolute_effects",
    "analyse_table",
    "cochran_mantel_haenszel",
    "cumulative",
    "distance",
    "egger",
    "harbord",
    "heterogeneity_p",
    "influence",
    "interaction_test",
    "leave_one_out",
    "meta_regression",
    "peters",
    "pool",
    "pool_bayesian",
    "pool_mantel_haenszel",
    "pool_many",
    "pool_one_stage",
    "pool_peto",
    "rank_correlation",
    "read_prior",
    "subgroup_analysis",
    "tau_prior",
    "trim_and_fill",
]
