"""One synthesis: the verified results of one outcome, pooled and monitored by the protocol's plan."""

from treering.synthesis.analyse import analyse
from treering.synthesis.estimates import repool_rows
from treering.synthesis.looks import plan_of
from treering.synthesis.numbers import plain, rounded
from treering.synthesis.standing import StateView
from treering.synthesis.trials import TrialRow, trial_rows

__all__ = ["StateView", "TrialRow", "analyse", "plain", "plan_of", "repool_rows", "rounded", "trial_rows"]
