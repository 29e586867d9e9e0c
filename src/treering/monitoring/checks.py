"""Refuse figures that no sequential plan can have, with what would have been right."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from treering.errors import AnalysisError

FloatArray = NDArray[np.float64]


def checked_increasing(values: ArrayLike, name: str) -> FloatArray:
    """Return `values` as a vector after checking that it is positive, finite and strictly increasing.

    Parameters
    ----------
    values : array_like, shape (k,)
        Information fractions or information values, in the order of the looks.
    name : str
        What they are called in the message.

    Returns
    -------
    ndarray of float, shape (k,)

    Raises
    ------
    AnalysisError
        If the vector is empty, not finite, not above zero or not increasing.
    """
    vector = np.atleast_1d(np.asarray(values, dtype=np.float64))
    usable = vector.ndim == 1 and vector.size > 0 and bool(np.all(np.isfinite(vector)))
    if not usable or vector[0] <= 0 or np.any(np.diff(vector) <= 0):
        raise AnalysisError(
            f"The {name} do not increase from look to look.",
            found=vector.tolist(),
            expected=f"{name} above 0, each larger than the one before",
            next_step="Leave out a look that brought no new information; a run without new data is no look.",
        )
    return vector


def check_alpha(alpha: float, name: str = "alpha") -> None:
    """Refuse an error rate outside (0, 0.5).

    Parameters
    ----------
    alpha : float
        Error rate, total over both tails when two-sided.
    name : str
        What it is called in the message.

    Raises
    ------
    AnalysisError
        If it is not strictly between 0 and 0.5.
    """
    if not 0.0 < alpha < 0.5:
        raise AnalysisError(
            f"The error rate {name} is outside the open interval from 0 to 0.5.",
            found=alpha,
            expected=f"0 < {name} < 0.5, for example 0.05",
            next_step="State error rates as probabilities (0.05), not as percentages (5).",
        )


def check_sides(sides: int) -> None:
    """Refuse anything but one- or two-sided testing.

    Parameters
    ----------
    sides : int
        1 or 2.

    Raises
    ------
    AnalysisError
        If it is neither.
    """
    if sides not in (1, 2):
        raise AnalysisError(
            "A test has one side or two.", found=sides, expected="1 or 2", next_step="Set sides in the plan."
        )


def check_power(power: float, alpha: float) -> None:
    """Refuse a power that does not lie between alpha and 1.

    Parameters
    ----------
    power : float
        Probability of a crossing under the effect to detect.
    alpha : float
        Error rate, total over both tails when two-sided.

    Raises
    ------
    AnalysisError
        If it is not strictly between alpha and 1.
    """
    if not alpha < power < 1.0:
        raise AnalysisError(
            "The power does not lie between alpha and 1.",
            found=power,
            expected=f"{alpha} < power < 1, for example 0.9",
            next_step="State the power as a probability; a plan must detect an effect more often than none.",
        )


def check_diversity(diversity: float) -> None:
    """Refuse a diversity D2 that is not a share below 1.

    Parameters
    ----------
    diversity : float
        D2, the share of the random-effects variance that is between trials.

    Raises
    ------
    AnalysisError
        If it is not in [0, 1).
    """
    if not 0.0 <= diversity < 1.0:
        raise AnalysisError(
            "No information size exists at this diversity (D2).",
            found=diversity,
            expected="0 <= D2 < 1, for example 0.25",
            next_step="State D2 as a share, not a percentage; with D2 near 1 plan on the number of trials.",
        )


def check_effect(effect: float, name: str = "effect to detect") -> None:
    """Refuse an effect to detect that is zero or not a number.

    Parameters
    ----------
    effect : float
        Effect on the analysis scale (log for ratios).
    name : str
        What it is called in the message.

    Raises
    ------
    AnalysisError
        If it is zero or not finite.
    """
    if not np.isfinite(effect) or effect == 0.0:
        raise AnalysisError(
            f"The {name} is zero or not a number, so no amount of information would suffice.",
            found=effect,
            expected="an effect different from no effect, on the analysis scale (log for ratios)",
            next_step="Set the minimally important difference of the outcome in the protocol.",
        )


def check_positive(value: float, name: str) -> None:
    """Refuse a figure that must be a finite number above zero.

    Parameters
    ----------
    value : float
        The figure.
    name : str
        What it is called in the message.

    Raises
    ------
    AnalysisError
        If it is not above zero and finite.
    """
    if not (np.isfinite(value) and value > 0.0):
        raise AnalysisError(
            f"The {name} is not a number above zero.",
            found=value,
            expected=f"a finite {name} above 0",
            next_step="Check the figure in the protocol or in the pooled result it comes from.",
        )


def check_share(value: float, name: str) -> None:
    """Refuse a risk or share that is not strictly between 0 and 1.

    Parameters
    ----------
    value : float
        The figure.
    name : str
        What it is called in the message.

    Raises
    ------
    AnalysisError
        If it is not in (0, 1).
    """
    if not 0.0 < value < 1.0:
        raise AnalysisError(
            f"The {name} is not between 0 and 1.",
            found=value,
            expected=f"0 < {name} < 1",
            next_step="State risks and shares as proportions (0.2), not as percentages (20).",
        )
