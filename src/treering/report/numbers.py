"""Numbers as readers meet them: on the natural scale, with a true minus sign, and honest when absent."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from treering.errors import ReportError

#: Digits that a stored or published number carries.
SIGNIFICANT_DIGITS = 10

NOT_ESTIMABLE = "not estimable"
MINUS = "\u2212"


def canonical(value: Any, place: str = "report") -> Any:
    """Round every number in a tree of plain values to 10 significant digits.

    Parameters
    ----------
    value : object
        None, bool, str, int, float, or lists, tuples and mappings of these.
    place : str
        Where the value stands; named when it can't be published.

    Returns
    -------
    object
        The same tree with plain dicts and lists.

    Raises
    ------
    ReportError
        For a number that is not finite or a value that has no place in JSON.
    """
    if value is None or isinstance(value, bool | str):
        return None if value is None else (value if isinstance(value, bool) else str(value))
    if isinstance(value, int):
        return int(value)
    if isinstance(value, float):
        if not math.isfinite(value):
            raise ReportError(
                f"the number at {place} is not finite.",
                found=value,
                expected="a number, or null if not estimable",
            )
        return float(f"{value:.{SIGNIFICANT_DIGITS}g}") + 0.0
    if isinstance(value, Mapping):
        return {str(key): canonical(inner, f"{place}.{key}") for key, inner in value.items()}
    if isinstance(value, Sequence | set | frozenset):
        return [canonical(inner, f"{place}[{i}]") for i, inner in enumerate(value)]
    raise ReportError(f"the value at {place} cannot be published.", found=type(value).__name__)


def natural(value: float | None, scale: str) -> float | None:
    """Take an effect from the analysis scale to the natural one.

    Parameters
    ----------
    value : float or None
        Effect on the analysis scale.
    scale : str
        "log" for ratios, "plain" for differences.

    Returns
    -------
    float or None
        The ratio or difference; infinite when a ratio is too large to hold.
    """
    if value is None or scale != "log":
        return value
    return math.exp(value) if value < 700 else math.inf


def number(value: float | None, digits: int = 2) -> str:
    """Write a number with fixed decimals; None is "not estimable".

    Parameters
    ----------
    value : float or None
        The number.
    digits : int
        Decimals.

    Returns
    -------
    str
    """
    if value is None:
        return NOT_ESTIMABLE
    if math.isinf(value):
        return "unbounded"
    # Four digits read well without a gap: 1000, but 12 000.
    text = f"{value:,.{digits}f}".replace(",", "\u202f" if abs(value) >= 10_000 else "")
    if float(f"{value:.{digits}f}") == 0.0:
        text = text.removeprefix("-")
    return text.replace("-", MINUS)


def plural(value: float, noun: str) -> str:
    """Write "1 trial" or "3 trials"; "person" becomes "people"."""
    several = "people" if noun == "person" else f"{noun}s"
    return f"{number(value, 0)} {noun if value == 1 else several}"


def small(value: float | None) -> str:
    """Write a number that may be very small with two significant digits at least."""
    if value is None:
        return NOT_ESTIMABLE
    if value == 0:
        return "0"
    if abs(value) >= 0.01:
        return number(value, 3)
    if abs(value) < 1e-4:
        return "below 0.0001" if value > 0 else number(value, 5)
    return number(value, 4)


def p_value(value: float | None) -> str:
    """Write a P value."""
    if value is None:
        return NOT_ESTIMABLE
    return "below 0.001" if value < 0.001 else number(value, 3)


def count(value: float | None) -> str:
    """Write a whole number with thin spaces; None is "not reported"."""
    return "not reported" if value is None else number(value, 0)


def percent(value: float | None, digits: int = 0) -> str:
    """Write a share as a percentage."""
    return NOT_ESTIMABLE if value is None else f"{number(100 * value, digits)}%"


def effect(value: float | None, scale: str, measure: str = "") -> str:
    """Write an effect on the natural scale with the decimals its size calls for.

    Parameters
    ----------
    value : float or None
        Effect on the analysis scale.
    scale : str
        "log" or "plain".
    measure : str
        Effect measure; a risk difference gets three decimals.

    Returns
    -------
    str
    """
    shown = natural(value, scale)
    if shown is None or math.isinf(shown):
        return number(shown)
    if scale != "log":
        return _apart(shown, 0.0, 3 if "risk-difference" in measure or "arcsine" in measure else 2)
    if shown >= 100:
        return number(shown, 0) if shown < 100_000 else f"above {number(100_000, 0)}"
    if shown >= 0.1:
        return _apart(shown, 1.0, 2)
    return f"{shown:.2g}" if shown >= 1e-4 else "below 0.0001"


def _apart(value: float, no_effect: float, digits: int) -> str:
    """Add decimals while rounding would hide on which side of no effect a value lies."""
    while value != no_effect and round(value, digits) == no_effect and digits < 6:
        digits += 1
    return number(value, digits)


def interval(low: float | None, high: float | None, scale: str, measure: str = "") -> str:
    """Write an interval on the natural scale as "low to high"; an open side is "unbounded"."""
    if low is None and high is None:
        return NOT_ESTIMABLE
    ends = ["unbounded" if end is None else effect(end, scale, measure) for end in (low, high)]
    return f"{ends[0]} to {ends[1]}"
