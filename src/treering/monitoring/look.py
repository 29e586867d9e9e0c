"""One row of the ledger: a look as it happened."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any

from treering.errors import AnalysisError
from treering.terms import Verdict


@dataclass(frozen=True, kw_only=True)
class Look:
    """A release (or a seen analysis before one) in which a monitored outcome was tested.

    Parameters
    ----------
    number : int
        1 for the first look of the outcome, counted through all its ledgers.
    date : str
        Day of the look, ISO 8601.
    version : int
        Version of the evidence the look was made for.
    trials : tuple of str
        Trials in the planned analysis, in the order given.
    estimate, standard_error, ci_low, ci_high : float or None
        Planned estimate on the analysis scale with the ordinary interval; None without a usable trial.
    information : float
        1/variance of the planned common-effect estimate; 0 without a usable trial.
    required, fraction : float
        Required information under the protocol's D2, and information / required.
    required_reestimated, fraction_reestimated, diversity_reestimated : float or None
        The same under the D2 estimated from the present trials; shown beside, never used for spending.
    required_inflated : float or None
        Required information inflated for the futility bound; None without one.
    z, p : float or None
        Signed normal quantile of the planned test's two-sided P value, and that P value; None when the
        planned test cannot be made.
    spends : bool
        Whether the look spent alpha.
    alpha_spent : float
        Cumulative alpha spent up to and with this look, through all ledgers of the outcome.
    boundary : float or None
        Critical Z (a magnitude) of a look that spends; None for others, and when the spending function
        allows so little that no finite Z could cross.
    redrawn_boundary : float or None
        Critical Z redrawn at the present fraction: what a crossing is compared with when no new alpha
        is available.
    futility : float or None
        Futility Z of the look.
    adjusted_low, adjusted_high : float or None
        Repeated interval (Jennison and Turnbull 1989) at the boundary that ruled the look; with one
        side, one limit is None.
    mixture_low, mixture_high : float or None
        Anytime-valid normal-mixture interval.
    verdict : Verdict
        In the fixed words.
    plan_digest : str
        Digest of the plan the look was made under; a new digest means a new ledger.
    remarks : tuple of str
        Plain sentences that explain the verdict.
    """

    number: int
    date: str
    version: int
    trials: tuple[str, ...]
    estimate: float | None
    standard_error: float | None
    ci_low: float | None
    ci_high: float | None
    information: float
    required: float
    fraction: float
    required_reestimated: float | None
    fraction_reestimated: float | None
    diversity_reestimated: float | None
    required_inflated: float | None
    z: float | None
    p: float | None
    spends: bool
    alpha_spent: float
    boundary: float | None
    redrawn_boundary: float | None
    futility: float | None
    adjusted_low: float | None
    adjusted_high: float | None
    mixture_low: float | None
    mixture_high: float | None
    verdict: Verdict
    plan_digest: str
    remarks: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """Return the look as plain JSON values.

        Returns
        -------
        dict
            Field name to str, int, float, bool, None or list of str.
        """
        values = {field.name: getattr(self, field.name) for field in fields(self)}
        return values | {
            "trials": list(self.trials),
            "remarks": list(self.remarks),
            "verdict": str(self.verdict),
        }

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Look:
        """Rebuild a look from `to_dict`.

        Parameters
        ----------
        values : mapping
            Fields by name.

        Returns
        -------
        Look

        Raises
        ------
        AnalysisError
            When a field is missing or not known.
        """
        names = {field.name for field in fields(cls)}
        if set(values) != names:
            raise AnalysisError(
                "A stored look does not have the fields of a look.",
                found=", ".join(sorted(set(values) ^ names)),
                expected="no missing and no further field",
                next_step="Run the audit: the ledger in the store may be damaged.",
            )
        return cls(
            **dict(values)
            | {
                "trials": tuple(values["trials"]),
                "remarks": tuple(values["remarks"]),
                "verdict": Verdict(values["verdict"]),
            }
        )
