"""Second opinions on the same data: other published rules beside the declared main one.

The main rule decides. When another disagrees, an alert says "depends on the method".
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtri

from treering.errors import AnalysisError
from treering.monitoring.anytime import iterated_logarithm_z, log_e_product, log_e_value
from treering.monitoring.checks import FloatArray
from treering.monitoring.dependence import z_at
from treering.monitoring.ledger import ledger_state
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.planned import check_trials, planned_test
from treering.monitoring.prior_tau2 import posterior_mean_tau2
from treering.monitoring.redrawn import SAME, Used, redrawn_value
from treering.monitoring.verdict import EFFICACY, crossing
from treering.terms import IntervalMethod, PoolingModel

DEPENDS = "depends on the method"
_LEAST_INFORMATION = math.e  # below it the iterated logarithm has no value


@dataclass(frozen=True, kw_only=True)
class Opinion:
    """What one rule says of the present data.

    Parameters
    ----------
    name : str
        The rule in words.
    statistic, threshold : float or None
        What is compared with what; None when the rule cannot be used yet.
    crossed : bool or None
        Whether the rule says crossed; None when it cannot be used yet.
    note : str
        Convention or reason, in one sentence.
    """

    name: str
    statistic: float | None
    threshold: float | None
    crossed: bool | None
    note: str

    def to_dict(self) -> dict[str, Any]:
        """Return the opinion as plain JSON values.

        Returns
        -------
        dict
        """
        return asdict(self)


@dataclass(frozen=True, kw_only=True)
class OpinionStrip:
    """All opinions, the declared main rule first.

    Parameters
    ----------
    opinions : tuple of Opinion
        The main rule and the others.
    """

    opinions: tuple[Opinion, ...]

    @property
    def agree(self) -> bool:
        """Whether every rule that can be used says what the main rule says."""
        main = self.opinions[0].crossed
        return all(other.crossed == main for other in self.opinions if other.crossed is not None)

    @property
    def sentence(self) -> str:
        """Empty when all agree, else "depends on the method"."""
        return "" if self.agree else DEPENDS


def second_opinions(
    plan: MonitoringPlan,
    looks: Sequence[Look],
    estimates: ArrayLike,
    variances: ArrayLike,
    *,
    prior_tau2: float | None = None,
) -> OpinionStrip:
    """Ask the other rules about the data of the last look.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan.
    looks : sequence of Look
        All looks, oldest first.
    estimates, variances : array_like, shape (k,)
        The trials of the last look, in order of entry.
    prior_tau2 : float, optional
        Prior mean of tau2 for the informative-prior opinion; left out, (effect to detect / 2)^2.

    Returns
    -------
    OpinionStrip

    Raises
    ------
    AnalysisError
        When there is no look or no trial.
    """
    y, v = np.asarray(estimates, dtype=float), np.asarray(variances, dtype=float)
    _, y, v = check_trials([str(i) for i in range(y.size)], y, v)
    if not looks or y.size == 0:
        raise AnalysisError(
            "There is no look to give a second opinion on.",
            next_step="Ask after the first look with a trial.",
        )
    last = looks[-1]
    critical = last.boundary if last.spends else last.redrawn_boundary
    prior = (plan.effect / 2.0) ** 2 if prior_tau2 is None else prior_tau2
    return OpinionStrip(
        opinions=(
            _main(plan, last, critical),
            _other_test(plan, y, v, critical),
            _other_diversity(plan, looks, last, critical),
            _informative_prior(plan, y, v, critical, prior),
            _iterated_logarithm(plan, last),
            _mixture(plan, last),
            _product(plan, last, y, v),
            _plain(plan, last),
        )
    )


def _against(plan: MonitoringPlan, name: str, z: float | None, critical: float | None, note: str) -> Opinion:
    """Compare a Z with a critical value as the plan's sides say."""
    if z is None or critical is None:
        crossed = None if z is None else False
        return Opinion(name=name, statistic=z, threshold=critical, crossed=crossed, note=note)
    crossed = crossing(plan, z, critical) is not None
    return Opinion(name=name, statistic=z, threshold=critical, crossed=crossed, note=note)


def _main(plan: MonitoringPlan, last: Look, critical: float | None) -> Opinion:
    note = "The declared main rule: Z of the planned test against the spending boundary of the ledger."
    opinion = _against(plan, "main rule", last.z, critical, note)
    return replace(opinion, crossed=last.verdict in EFFICACY)


def _other_test(plan: MonitoringPlan, y: FloatArray, v: FloatArray, critical: float | None) -> Opinion:
    """Ask with the Wald test beside a Knapp-Hartung plan, and the other way round."""
    wald = plan.interval == IntervalMethod.WALD
    other = IntervalMethod.MODIFIED_KNAPP_HARTUNG if wald else IntervalMethod.WALD
    test = planned_test(replace(plan, model=PoolingModel.RANDOM, interval=other), y, v)
    name = "modified Knapp-Hartung Z" if wald else "Wald Z"
    note = "Random effects with the other test, against the same boundary."
    return _against(plan, name, None if test is None else test.z, critical, note)


def _other_diversity(
    plan: MonitoringPlan, looks: Sequence[Look], last: Look, critical: float | None
) -> Opinion:
    """Redraw the boundary with the required information under the re-estimated D2."""
    name = "re-estimated diversity"
    note = "The planned Z against a boundary redrawn for the D2 of the present trials."
    if last.required_reestimated is None:
        return _against(plan, name, None, None, note + " D2 cannot be estimated yet.")
    if critical is None:
        return _against(plan, name, last.z, None, note + " No alpha is available at this look.")
    redrawn: list[Used] = []
    required = last.required_reestimated
    for information, _ in ledger_state(plan, looks).used:
        if information < min(last.information, required) * (1.0 - SAME):
            redrawn.append((information, redrawn_value(plan, redrawn, information, required, plan.alpha)))
    own = redrawn_value(plan, redrawn, last.information, required, plan.alpha)
    return _against(plan, name, last.z, own, note)


def _informative_prior(
    plan: MonitoringPlan, y: FloatArray, v: FloatArray, critical: float | None, prior: float
) -> Opinion:
    """Use the posterior mean of tau2 under an informative prior in a Wald test."""
    name = "informative prior for tau2"
    note = (
        f"Wald Z with the posterior mean of tau2 under an inverse-gamma prior of mean {prior:.3g} (idea: "
        "Higgins, Whitehead and Simmonds 2011), against the same boundary."
    )
    wald = replace(plan, model=PoolingModel.RANDOM, interval=IntervalMethod.WALD)
    z = z_at(wald, y, v, posterior_mean_tau2(y, v, prior_mean=prior))
    return _against(plan, name, z, critical, note)


def _ordinary(plan: MonitoringPlan) -> float:
    """Return the critical Z of a single test at the plan's alpha."""
    return -float(ndtri(plan.alpha / plan.sides))


def _iterated_logarithm(plan: MonitoringPlan, last: Look) -> Opinion:
    name = "law of the iterated logarithm"
    note = "The planned Z penalised by the iterated logarithm of the information, against the ordinary bound."
    if last.z is None or last.information <= _LEAST_INFORMATION:
        return _against(plan, name, None, None, note + " It has no value yet.")
    return _against(plan, name, iterated_logarithm_z(last.z, last.information), _ordinary(plan), note)


def _mixture(plan: MonitoringPlan, last: Look) -> Opinion:
    """Ask the anytime-valid mixture; its log e-value passes log(1/alpha) when the interval leaves out 0."""
    name = "anytime-valid mixture"
    note = f"Log e-value of the planned estimate, normal mixture with SD {plan.mixture_prior_sd:.3g}."
    if last.estimate is None or not last.standard_error:
        return _against(plan, name, None, None, note)
    value = log_e_value(last.estimate, last.standard_error, prior_sd=plan.mixture_prior_sd)
    return _evidence(plan, last, name, value, note)


def _product(plan: MonitoringPlan, last: Look, y: FloatArray, v: FloatArray) -> Opinion:
    name = "product of e-values over trials"
    note = "Log product of one e-value per trial (ter Schure 2022), against no effect in any trial."
    value = log_e_product(y, np.sqrt(v), prior_sd=plan.mixture_prior_sd)[-1]
    return _evidence(plan, last, name, float(value), note)


def _evidence(plan: MonitoringPlan, last: Look, name: str, value: float, note: str) -> Opinion:
    """Compare a log e-value with log(1/alpha); with one side only in the tested direction."""
    threshold = -math.log(plan.alpha)
    crossed = value >= threshold
    if plan.sides == 1 and last.estimate is not None:
        crossed = crossed and last.estimate * plan.tested_direction > 0
    return Opinion(name=name, statistic=value, threshold=threshold, crossed=crossed, note=note)


def _plain(plan: MonitoringPlan, last: Look) -> Opinion:
    note = "The planned Z against the bound of a single test, as if this were the only look ever."
    return _against(plan, "plain interval", last.z, _ordinary(plan), note)
