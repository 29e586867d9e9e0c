"""Do two estimates differ? The test of interaction (Altman and Bland 2003, BMJ 326:219).

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import pandas as pd
from scipy import stats

from treering.effects import effect_sizes
from treering.errors import AnalysisError
from treering.pooling.arrays import numbers
from treering.pooling.checks import check_level


@dataclass(frozen=True, slots=True)
class Interaction:
    """Difference of two estimates on the analysis scale, the first minus the second.

    ``z`` is difference / standard error; it is read against Student's t when ``df`` is given, else against
    the normal distribution. For ratios, the exponential of the difference is the ratio of the two ratios.
    """

    difference: float
    standard_error: float
    ci_low: float
    ci_high: float
    z: float
    p: float
    df: int | None = None


def interaction_of(
    difference: float, standard_error: float, *, level: float = 0.95, df: int | None = None
) -> Interaction:
    """Test and interval of a difference with its standard error.

    Parameters
    ----------
    difference, standard_error : float
        On the analysis scale.
    level : float
        Confidence level.
    df : int, optional
        Degrees of freedom; normal distribution when left out.

    Returns
    -------
    Interaction
    """
    if not (math.isfinite(difference) and math.isfinite(standard_error) and standard_error > 0):
        raise AnalysisError(
            "A difference needs a finite value and a standard error above 0.",
            found=f"{difference} with standard error {standard_error}",
        )
    law = stats.norm if df is None else stats.t(df)
    half = float(law.ppf(0.5 + check_level(level) / 2)) * standard_error
    z = difference / standard_error
    return Interaction(
        difference=difference,
        standard_error=standard_error,
        ci_low=difference - half,
        ci_high=difference + half,
        z=z,
        p=float(2 * law.sf(abs(z))),
        df=df,
    )


def interaction_test(
    first: tuple[float, float, float],
    second: tuple[float, float, float],
    measure: str,
    *,
    level: float = 0.95,
) -> Interaction:
    """Compare two independent published estimates.

    Parameters
    ----------
    first, second : tuple of float
        Estimate with lower and upper confidence limit, on the natural scale.
    measure : str
        A ``treering.terms.Measure``; ratios are compared on the log scale.
    level : float
        Level of the given intervals and of the resulting one.

    Returns
    -------
    Interaction
        First minus second on the analysis scale.

    Raises
    ------
    AnalysisError
        When an interval does not hold its estimate or is not symmetric on the analysis scale.
    """
    for name, given in (("first", first), ("second", second)):
        if numbers(given, name).size != 3:
            raise AnalysisError(f"{name} must be an estimate with its lower and upper limit.", found=given)
    table = pd.DataFrame(
        [first, second],
        columns=["estimate", "ci_low", "ci_high"],
        index=["first estimate", "second estimate"],
    )
    table["ci_level"] = check_level(level)
    sizes = effect_sizes(table, measure)
    estimates, variances = sizes["estimate"].to_numpy(), sizes["variance"].to_numpy()
    return interaction_of(float(estimates[0] - estimates[1]), math.sqrt(float(variances.sum())), level=level)
