"""How much of alpha (or beta) may be used up by a given fraction of the required information.

The convention for two-sided plans is fixed and printed: the function is applied to alpha/2 in each
tail. For the O'Brien-Fleming-type function this matters: at five equal looks the
first bound is 4.877; applied once to the whole alpha it would be 4.383.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from treering.errors import AnalysisError
from treering.monitoring.checks import FloatArray, check_alpha, check_sides
from treering.terms import Spending

DEFAULT_PARAMETER = {Spending.POWER_FAMILY: 3.0, Spending.HWANG_SHIH_DECANI: -4.0}
PER_TAIL_CONVENTION = "two-sided plans apply the spending function to alpha/2 in each tail"


def _obrien_fleming(t: FloatArray, alpha: float, parameter: float) -> FloatArray:
    """2 (1 - Phi(z(1 - alpha/2) / sqrt(t))): Lan and DeMets 1983, first function."""
    critical = -special.ndtri(alpha / 2.0)
    spent: FloatArray = 2.0 * special.ndtr(-critical / np.sqrt(t))
    return spent


def _pocock(t: FloatArray, alpha: float, parameter: float) -> FloatArray:
    """Alpha log(1 + (e - 1) t): Lan and DeMets 1983, second function."""
    spent: FloatArray = alpha * np.log1p((np.e - 1.0) * t)
    return spent


def _power_family(t: FloatArray, alpha: float, parameter: float) -> FloatArray:
    """Alpha t^rho: Kim and DeMets 1987."""
    spent: FloatArray = alpha * t**parameter
    return spent


def _hwang_shih_decani(t: FloatArray, alpha: float, parameter: float) -> FloatArray:
    """Alpha (1 - exp(-gamma t)) / (1 - exp(-gamma)), alpha t at gamma 0: Hwang, Shih, DeCani 1990."""
    if parameter == 0.0:
        return alpha * t
    spent: FloatArray = alpha * np.expm1(-parameter * t) / np.expm1(-parameter)
    return spent


_FUNCTIONS: dict[Spending, Callable[[FloatArray, float, float], FloatArray]] = {
    Spending.OBRIEN_FLEMING: _obrien_fleming,
    Spending.POCOCK: _pocock,
    Spending.POWER_FAMILY: _power_family,
    Spending.HWANG_SHIH_DECANI: _hwang_shih_decani,
}


def spending_function(name: str) -> Spending:
    """Return the spending function of this name.

    Parameters
    ----------
    name : str or Spending
        "obrien-fleming", "pocock", "power-family" or "hwang-shih-decani".

    Returns
    -------
    Spending

    Raises
    ------
    AnalysisError
        If there is none of this name.
    """
    try:
        return Spending(name)
    except ValueError as error:
        raise AnalysisError(
            "There is no spending function of this name.",
            found=name,
            expected=", ".join(Spending),
            next_step="Write the name out in the monitoring plan of the outcome.",
        ) from error


def spending_parameter(spending: Spending, parameter: float | None) -> float:
    """Return the shape parameter in force: rho of the power family, gamma of Hwang, Shih and DeCani.

    Parameters
    ----------
    spending : Spending
        The function.
    parameter : float or None
        Its parameter; None takes rho 3 or gamma -4, both close to the O'Brien-Fleming-type function.

    Returns
    -------
    float
        NaN for a function without a parameter.

    Raises
    ------
    AnalysisError
        If a parameter is given to a function that has none, rho is not above 0 or gamma is not finite.
    """
    if spending not in DEFAULT_PARAMETER:
        usable = parameter is None
        value = np.nan
    else:
        value = DEFAULT_PARAMETER[spending] if parameter is None else float(parameter)
        usable = bool(np.isfinite(value)) and (spending is Spending.HWANG_SHIH_DECANI or value > 0.0)
    if not usable:
        raise AnalysisError(
            f"The parameter does not fit the spending function {spending}.",
            found=parameter,
            expected="rho above 0 (power-family), a finite gamma (hwang-shih-decani), none for the others",
            next_step="Correct spending or its parameter in the monitoring plan.",
        )
    return value


def alpha_spent(
    fractions: ArrayLike,
    *,
    alpha: float = 0.05,
    sides: int = 2,
    spending: str = Spending.OBRIEN_FLEMING,
    parameter: float | None = None,
) -> FloatArray:
    """Return the cumulative alpha allowed at each information fraction, total over the tails.

    Parameters
    ----------
    fractions : array_like, shape (k,)
        Information fractions, 0 or more; from 1 on all of alpha is spent.
    alpha : float
        Error rate, total over both tails when two-sided, in (0, 0.5).
    sides : {1, 2}
        Sides of the test; two-sided plans apply the function to alpha/2 in each tail.
    spending : str or Spending
        The function.
    parameter : float, optional
        rho (power family, default 3) or gamma (Hwang, Shih and DeCani, default -4).

    Returns
    -------
    ndarray of float, shape (k,)
        Probabilities, capped at alpha.

    Raises
    ------
    AnalysisError
        If alpha, sides, the name, the parameter or a fraction cannot be used.

    References
    ----------
    Lan and DeMets 1983, Biometrika 70:659. Kim and DeMets 1987, Biometrika 74:149.
    Hwang, Shih and DeCani 1990, Statistics in Medicine 9:1439.
    """
    check_alpha(alpha)
    check_sides(sides)
    return _spent(fractions, alpha, sides, spending, parameter)


def beta_spent(
    fractions: ArrayLike,
    *,
    beta: float = 0.1,
    spending: str = Spending.OBRIEN_FLEMING,
    parameter: float | None = None,
) -> FloatArray:
    """Return the cumulative beta (chance of a wrong futility stop) allowed at each fraction.

    Parameters
    ----------
    fractions : array_like, shape (k,)
        Information fractions, 0 or more; from 1 on all of beta is spent.
    beta : float
        One minus the power, in (0, 1).
    spending : str or Spending
        The function, applied once to the whole beta.
    parameter : float, optional
        rho (power family, default 3) or gamma (Hwang, Shih and DeCani, default -4).

    Returns
    -------
    ndarray of float, shape (k,)
        Probabilities, capped at beta.

    Raises
    ------
    AnalysisError
        If beta, the name, the parameter or a fraction cannot be used.

    References
    ----------
    Pampallona, Tsiatis and Kim 2001, Drug Information Journal 35:1113.
    """
    if not 0.0 < beta < 1.0:
        raise AnalysisError(
            "The chance beta to miss the effect is outside the open interval from 0 to 1.",
            found=beta,
            expected="0 < beta < 1, for example 0.1 for a power of 90%",
            next_step="State beta as one minus the power.",
        )
    return _spent(fractions, beta, 1, spending, parameter)


def _spent(
    fractions: ArrayLike, rate: float, sides: int, spending: str, parameter: float | None
) -> FloatArray:
    """Apply the function to rate/sides in each tail and cap the total at the rate."""
    function = spending_function(spending)
    shape = spending_parameter(function, parameter)
    t = np.atleast_1d(np.asarray(fractions, dtype=np.float64))
    if not np.all(t >= 0.0):
        raise AnalysisError(
            "An information fraction is below 0 or not a number.",
            found=t.tolist(),
            expected="fractions of 0 or more",
            next_step="Divide the information of each look by the required information.",
        )
    with np.errstate(divide="ignore"):
        per_tail = _FUNCTIONS[function](np.minimum(t, 1.0), rate / sides, shape)
    spent: FloatArray = np.where(t >= 1.0, rate, np.minimum(sides * per_tail, rate))
    return spent
