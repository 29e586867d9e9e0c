"""Numbers as they are stored and printed: 10 significant digits, and None where nothing can be estimated.

Ten digits are far more than any reader needs and few enough that the last bits, in which linear algebra
differs between machines, do not reach the bytes of a report.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from enum import Enum
from typing import Any

import numpy as np

SIGNIFICANT_DIGITS = 10
#: Beyond this a whole number is not exact in JSON (RFC 8785).
LARGEST_WHOLE = 2**53


def rounded(value: float) -> float | int | None:
    """Return `value` with 10 significant digits; None when it is not finite.

    Parameters
    ----------
    value : float
        Any number.

    Returns
    -------
    float, int or None
        A whole number is an int, as it is when it is read back from JSON.
    """
    number = float(value)
    if not math.isfinite(number):
        return None
    short = float(f"{number:.{SIGNIFICANT_DIGITS - 1}e}")
    if not math.isfinite(short):  # the very largest floats would be rounded up to infinity
        return number
    return int(short) if short.is_integer() and abs(short) < LARGEST_WHOLE else short


def plain(value: Any) -> Any:
    """Return `value` as plain JSON: floats rounded, NumPy scalars and enums unpacked, tuples as lists.

    Parameters
    ----------
    value : object
        Numbers, text, None, enums, arrays, mappings and sequences of these.

    Returns
    -------
    object
        dict, list, str, int, float, bool or None.
    """
    if isinstance(value, Enum):
        return value.value
    if value is None or isinstance(value, str | bool | np.bool_):
        return bool(value) if isinstance(value, np.bool_) else value
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return rounded(float(value))
    if isinstance(value, Mapping):
        return {str(name): plain(value[name]) for name in sorted(value)}
    if isinstance(value, np.ndarray):
        return [plain(item) for item in value.tolist()]
    if isinstance(value, Sequence | set | frozenset):
        return [plain(item) for item in value]
    raise TypeError(f"{type(value).__name__} has no plain JSON form")
