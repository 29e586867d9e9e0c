"""What a simulation found, rule by rule, with its Monte Carlo errors."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray
from treering.monitoring.design import SimulationDesign
from treering.monitoring.plan import MonitoringPlan
from treering.monitoring.redrawn import SAME
from treering.monitoring.simulate_rules import PLAN

_ERRORS = 1.96  # Monte Carlo errors within which a rate counts as held


@dataclass(frozen=True, kw_only=True)
class SimulatedRule:
    """How one rule fared at one true effect and one between-trial variance.

    Parameters
    ----------
    rule : str
        The rule in words.
    tau2, effect : float
        What was true, on the analysis scale.
    reviews : int
        Reviews simulated.
    alarm, alarm_error : float
        Share of reviews with a crossing at any look (at effect 0: false alarms), and its Monte Carlo
        standard error.
    right_way : float
        Share with a first crossing to the side of the true effect (at effect 0: to the benefit side).
    harm : float
        Share with a first crossing of the harm boundary.
    information, information_error : float or None
        Mean information at the first crossing; None without a crossing.
    lost, lost_error : float or None
        Share of the crossings that were not supported at some later look of the design.
    bias, bias_error : float or None
        Mean distance of the estimate at the first crossing beyond the true effect, in the direction of
        the crossing.
    """

    rule: str
    tau2: float
    effect: float
    reviews: int
    alarm: float
    alarm_error: float
    right_way: float
    harm: float
    information: float | None
    information_error: float | None
    lost: float | None
    lost_error: float | None
    bias: float | None
    bias_error: float | None


@dataclass(frozen=True, kw_only=True)
class SimulationResult:
    """All rules at all true effects and between-trial variances.

    Parameters
    ----------
    plan : MonitoringPlan
        The plan that was simulated.
    design : SimulationDesign
        Trials and looks.
    seed, reviews : int
        Seed, and reviews per row.
    rows : tuple of SimulatedRule
        One for each true effect, tau2 and rule.
    """

    plan: MonitoringPlan
    design: SimulationDesign
    seed: int
    reviews: int
    rows: tuple[SimulatedRule, ...]

    def row(self, rule: str, *, tau2: float, effect: float = 0.0) -> SimulatedRule:
        """Return one row.

        Parameters
        ----------
        rule : str
            Rule in words.
        tau2, effect : float
            What was true.

        Returns
        -------
        SimulatedRule

        Raises
        ------
        AnalysisError
            When it was not simulated.
        """
        for row in self.rows:
            if (row.rule, row.tau2, row.effect) == (rule, tau2, effect):
                return row
        raise AnalysisError(
            "This row was not simulated.",
            found=f"{rule}, tau2 {tau2}, effect {effect}",
            expected=", ".join(sorted({row.rule for row in self.rows})),
            next_step="Choose a rule, tau2 and effect of the design.",
        )

    @property
    def worst(self) -> SimulatedRule:
        """The plan's row with the most false alarms."""
        nulls = [row for row in self.rows if row.rule == PLAN and row.effect == 0.0]
        return max(nulls, key=lambda row: row.alarm)

    @property
    def exceeds(self) -> bool:
        """Whether the plan's false alarms are above its alpha by more than Monte Carlo error."""
        return self.worst.alarm - _ERRORS * self.worst.alarm_error > self.plan.alpha

    @property
    def sentence(self) -> str:
        """What the simulation says of the plan's alpha."""
        worst = self.worst
        found = f"{100 * worst.alarm:.1f}% (Monte Carlo error {100 * worst.alarm_error:.2f})"
        start = f"Simulated false alarms of the plan: at most {found}, at tau2 {worst.tau2:g}"
        place = "above" if self.exceeds else "within"
        text = f"{start}: {place} its alpha of {100 * self.plan.alpha:g}%."
        if self.exceeds:
            text += " Calibrate the plan."
        if self.last_fraction < 1.0 - SAME:
            text += (
                f" The design ends at {100 * self.last_fraction:.0f}% of the required information; what "
                "would happen after it is not counted."
            )
        return text

    @property
    def last_fraction(self) -> float:
        """Information fraction at the last look of the design."""
        return float(self.design.accrued[-1]) / self.plan.required_information

    def to_dict(self) -> dict[str, Any]:
        """Return the result as plain JSON values.

        Returns
        -------
        dict
        """
        return {
            "plan": self.plan.to_dict(),
            "plan_digest": self.plan.digest(),
            "design": self.design.to_dict(),
            "required": self.plan.required_information,
            "last_fraction": self.last_fraction,
            "seed": self.seed,
            "reviews": self.reviews,
            "exceeds": self.exceeds,
            "sentence": self.sentence,
            "rows": [asdict(row) for row in self.rows],
        }


def rule_row(rule: str, tau2: float, effect: float, sums: FloatArray) -> SimulatedRule:
    """Turn the sums of `tally` into shares and means with their Monte Carlo errors.

    Parameters
    ----------
    rule : str
        The rule in words.
    tau2, effect : float
        What was true.
    sums : numpy.ndarray, shape (9,)
        Sums over the reviews.

    Returns
    -------
    SimulatedRule
    """
    n, crossed, right, info, info2, lost, beyond, beyond2, harm = (float(value) for value in sums)
    mean = _mean(info, info2, crossed)
    bias = _mean(beyond, beyond2, crossed)
    return SimulatedRule(
        rule=rule,
        tau2=tau2,
        effect=effect,
        reviews=int(n),
        alarm=crossed / n,
        alarm_error=share_error(crossed, n),
        right_way=right / n,
        harm=harm / n,
        information=mean[0],
        information_error=mean[1],
        lost=lost / crossed if crossed else None,
        lost_error=share_error(lost, crossed) if crossed else None,
        bias=bias[0],
        bias_error=bias[1],
    )


def share_error(count: float, n: float) -> float:
    """Return the standard error of a share, not zero at 0 or all (half a case is added to each side).

    Parameters
    ----------
    count, n : float
        Cases, and reviews in all.

    Returns
    -------
    float
    """
    share = (count + 0.5) / (n + 1.0)
    return float((share * (1.0 - share) / n) ** 0.5)


def _mean(total: float, squares: float, n: float) -> tuple[float | None, float | None]:
    """Return a mean and its standard error from a sum and a sum of squares."""
    if n == 0:
        return None, None
    mean = total / n
    return mean, float((max(squares / n - mean**2, 0.0) / n) ** 0.5)
