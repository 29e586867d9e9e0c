"""Many trials pooled into one effect.

The numeric core: arrays or pandas in, frozen values out, effects on the analysis scale.
"""

from treering.pooling.absolute import AbsoluteEffect, absolute_effects
from treering.pooling.analyse import TableAnalysis, analyse_table
from treering.pooling.bayes import BayesianEffect, pool_bayesian
from treering.pooling.credibility import SUBGROUP_QUESTIONS, SubgroupAnswer, SubgroupCredibility
from treering.pooling.interaction import Interaction, interaction_test
from treering.pooling.inverse_variance import pool, pool_many
from treering.pooling.one_stage import OneStageEffect, pool_one_stage
from treering.pooling.one_stage_models import OneStageModel
from treering.pooling.priors import EMPIRICAL_PRIORS, HalfCauchy, HalfNormal, LogNormal, LogStudent, tau_prior
from treering.pooling.regression import MetaRegression, meta_regression
from treering.pooling.result import PooledEffect
from treering.pooling.subgroups import SubgroupAnalysis, SubgroupEffect, subgroup_analysis

__all__ = [
    "EMPIRICAL_PRIORS",
    "SUBGROUP_QUESTIONS",
    "AbsoluteEffect",
    "BayesianEffect",
    "HalfCauchy",
    "HalfNormal",
    "Interaction",
    "LogNormal",
    "LogStudent",
    "MetaRegression",
    "OneStageEffect",
    "OneStageModel",
    "PooledEffect",
    "SubgroupAnalysis",
    "SubgroupAnswer",
    "SubgroupCredibility",
    "SubgroupEffect",
    "TableAnalysis",
    "absolute_effects",
    "analyse_table",
    "interaction_test",
    "meta_regression",
    "pool",
    "pool_bayesian",
    "pool_many",
    "pool_one_stage",
    "subgroup_analysis",
    "tau_prior",
]
