"""The monitoring plan of one outcome: what the protocol fixes before the first look.

The plan holds plain fields only, so that its digest can be stored beside every look: a ledger belongs to
one plan, and a plan that changed opens a new ledger.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, fields
from enum import StrEnum
from typing import TypeVar

from treering.errors import AnalysisError
from treering.monitoring.checks import (
    check_alpha,
    check_diversity,
    check_effect,
    check_positive,
    check_power,
    check_sides,
)
from treering.monitoring.information import required_information
from treering.monitoring.spending import spending_parameter
from treering.terms import (
    Better,
    IntervalMethod,
    OutcomeRole,
    PoolingModel,
    PredictionDf,
    Spending,
    Tau2,
)

_Term = TypeVar("_Term", bound=StrEnum)

#: Fields that describe the display only; a change of one of them does not open a new ledger.
DISPLAY_FIELDS = frozenset({"level", "prediction_df"})


@dataclass(frozen=True, kw_only=True)
class MonitoringPlan:
    """What the protocol fixes for one monitored outcome.

    Parameters
    ----------
    effect : float
        Effect to detect on the analysis scale (log for ratios, the outcome's own unit for differences);
        its magnitude sets the required information. Either sign is accepted: the direction of benefit
        is said by `better`.
    better : Better or str
        Which direction of the pooled effect on the analysis scale is good for patients.
    role : OutcomeRole or str
        "benefit" or "harm". With one side, a benefit is tested in the good direction and a harm in the
        bad one.
    alpha : float
        Total two-sided (`sides` 2) or one-sided (`sides` 1) type I error of this outcome.
    sides : int
        1 or 2.
    power : float
        Power at the required information.
    spending : Spending or str
        Spending function; applied to alpha/2 in each tail when two-sided.
    spending_parameter : float, optional
        rho of the power family (default 3) or gamma of Hwang, Shih and DeCani (default -4).
    diversity : float
        D2 in [0, 1), fixed by protocol.
    model, tau2, interval : PoolingModel, Tau2, IntervalMethod or str
        The planned test. With the common-effect model there is no between-trial variance, and the test
        is always the Wald test.
    futility : bool
        Non-binding futility bound by beta spending; refused for a harm.
    prior_sd : float, optional
        Standard deviation, on the analysis scale, of the normal mixture behind the anytime-valid
        interval. Left out, it is the magnitude of `effect`; see `mixture_prior_sd`.
    level : float
        Level of the ordinary interval shown beside the monitoring.
    prediction_df : PredictionDf or str
        Degrees of freedom of the prediction interval, "k-2" or "k-1".

    Raises
    ------
    AnalysisError
        When a field cannot be used; the message says what to do.
    """

    effect: float
    better: Better | str = Better.LOWER
    role: OutcomeRole | str = OutcomeRole.BENEFIT
    alpha: float = 0.05
    sides: int = 2
    power: float = 0.9
    spending: Spending | str = Spending.OBRIEN_FLEMING
    spending_parameter: float | None = None
    diversity: float = 0.0
    model: PoolingModel | str = PoolingModel.RANDOM
    tau2: Tau2 | str = Tau2.REML
    interval: IntervalMethod | str = IntervalMethod.MODIFIED_KNAPP_HARTUNG
    futility: bool = False
    prior_sd: float | None = None
    level: float = 0.95
    prediction_df: PredictionDf | str = PredictionDf.K_MINUS_2

    def __post_init__(self) -> None:
        """Turn words into terms and refuse what cannot be monitored."""
        for name, terms in _TERMS.items():
            object.__setattr__(self, name, _term(name, getattr(self, name), terms))
        if PoolingModel(self.model) is PoolingModel.COMMON:
            object.__setattr__(self, "interval", IntervalMethod.WALD)
        _check_numbers(self)
        _check_choices(self)

    @property
    def required_information(self) -> float:
        """Information (1/variance, analysis scale) at which the plan has its power.

        ((z(1-alpha/sides) + z(power)) / effect)^2 / (1 - D2); Wetterslev, Thorlund, Brok and Gluud 2009,
        BMC Med Res Methodol 9:86, on the information scale.
        """
        return required_information(
            self.effect, alpha=self.alpha, power=self.power, sides=self.sides, diversity=self.diversity
        )

    @property
    def mixture_prior_sd(self) -> float:
        """Prior SD of the normal mixture: as planned, else the magnitude of the effect to detect.

        The mixture interval at variance V is narrowest when x = prior_sd^2/V solves
        x - log(1 + x) = 2 log(1/alpha) (set the derivative of Robbins' 1970 radius to zero); at the
        required information with alpha 0.05 and power 0.9 that is 0.88 times the effect, and the radius
        is flat there: the effect itself costs less than 1% of width and needs no explanation.
        """
        return abs(self.effect) if self.prior_sd is None else self.prior_sd

    @property
    def tested_direction(self) -> int:
        """Sign, on the analysis scale, in which a one-sided plan can cross; +1 or -1.

        For a two-sided plan it is the direction of benefit (role "benefit") or of harm (role "harm").
        """
        good = 1 if self.better == Better.HIGHER else -1
        return good if self.role == OutcomeRole.BENEFIT else -good

    @property
    def benefit_direction(self) -> int:
        """Sign, on the analysis scale, that is good for patients; +1 or -1."""
        return 1 if self.better == Better.HIGHER else -1

    def to_dict(self) -> dict[str, object]:
        """Return the fields as plain JSON values.

        Returns
        -------
        dict
            Field name to str, int, float, bool or None.
        """
        return {name: str(v) if isinstance(v, StrEnum) else v for name, v in asdict(self).items()}

    @classmethod
    def from_dict(cls, values: Mapping[str, object]) -> MonitoringPlan:
        """Rebuild a plan from `to_dict`.

        Parameters
        ----------
        values : mapping
            Fields by name.

        Returns
        -------
        MonitoringPlan

        Raises
        ------
        AnalysisError
            When a name is unknown or a value cannot be used.
        """
        unknown = sorted(set(values) - {field.name for field in fields(cls)})
        if unknown:
            raise AnalysisError(
                "The monitoring plan has fields that are not known.",
                found=", ".join(unknown),
                expected=", ".join(field.name for field in fields(cls)),
                next_step="Remove or rename them in config/review.toml.",
            )
        return cls(**values)  # type: ignore[arg-type]

    def digest(self) -> str:
        """Return the SHA-256 of the fields that rule the ledger (not of those for display).

        Returns
        -------
        str
            64 hexadecimal digits.
        """
        ruling = {name: value for name, value in self.to_dict().items() if name not in DISPLAY_FIELDS}
        ruling = {n: float(v) if isinstance(v, int) and n in _FLOATS else v for n, v in ruling.items()}
        text = json.dumps(ruling, sort_keys=True, separators=(",", ":"))
        return hashlib.sha256(text.encode()).hexdigest()


_TERMS: dict[str, type[StrEnum]] = {
    "better": Better,
    "role": OutcomeRole,
    "spending": Spending,
    "model": PoolingModel,
    "tau2": Tau2,
    "interval": IntervalMethod,
    "prediction_df": PredictionDf,
}
_FLOATS = frozenset({"effect", "alpha", "power", "spending_parameter", "diversity", "prior_sd"})


def _term(name: str, value: object, terms: type[_Term]) -> _Term:
    try:
        return terms(str(value))
    except ValueError as error:
        raise AnalysisError(
            f"{name} of the monitoring plan is not a known word.",
            found=repr(value),
            expected=", ".join(repr(str(term)) for term in terms),
            next_step="Write one of these words in the protocol.",
        ) from error


def _refuse(message: str, *, found: object, expected: str, next_step: str) -> None:
    raise AnalysisError(message, found=found, expected=expected, next_step=next_step)


def _check_numbers(plan: MonitoringPlan) -> None:
    """Refuse numbers outside their range."""
    check_effect(plan.effect)
    check_sides(plan.sides)
    check_alpha(plan.alpha)
    check_power(plan.power, plan.alpha)
    check_diversity(plan.diversity)
    spending_parameter(Spending(plan.spending), plan.spending_parameter)
    if not 0.0 < plan.level < 1.0:
        _refuse(
            "The level of the interval is out of range.",
            found=plan.level,
            expected="above 0 and below 1",
            next_step="Give it as a proportion, for example 0.95.",
        )
    if plan.prior_sd is not None:
        check_positive(plan.prior_sd, "prior standard deviation of the mixture")


def _check_choices(plan: MonitoringPlan) -> None:
    """Refuse choices that do not go together."""
    if plan.futility and plan.role == OutcomeRole.HARM:
        _refuse(
            "A harm cannot have a futility bound: absence of evidence must not end the watch.",
            found="futility for a harm",
            expected="futility = false",
            next_step="Remove futility from this outcome.",
        )
