"""Frozen results to plain JSON values."""

from __future__ import annotations

import dataclasses
import datetime
import math
from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd

RATIO_FIELDS = ("estimate", "ci_low", "ci_high", "prediction_low", "prediction_high", "next_low", "next_high")


def plain(value: object) -> Any:
    """Turn a result into dicts, lists, strings, numbers, booleans and None.

    Parameters
    ----------
    value : object
        Dataclass, mapping, sequence, array, DataFrame, enum or scalar.

    Returns
    -------
    object
        JSON values; NaN and infinity become None, since JSON has neither.

    Raises
    ------
    TypeError
        For a kind of value that has no plain form.
    """
    if value is None or isinstance(value, bool | np.bool_):
        return None if value is None else bool(value)
    if isinstance(value, str):
        return str(value)
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, datetime.date):
        return value.isoformat()
    return _composite(value)


def _composite(value: object) -> Any:
    """Turn a value made of others into plain ones."""
    if isinstance(value, pd.DataFrame):
        return [{str(k): plain(v) for k, v in row.items()} for row in value.reset_index().to_dict("records")]
    if isinstance(value, pd.Series):
        return [plain(item) for item in value]
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    raise TypeError(f"no plain form for {type(value).__name__}")


def with_natural(block: dict[str, Any], *, ratio: bool) -> dict[str, Any]:
    """Add the estimate and its limits on the natural scale to a block on the analysis scale.

    Parameters
    ----------
    block : dict
        Plain values with some of ``RATIO_FIELDS``.
    ratio : bool
        Whether the analysis scale is the log.

    Returns
    -------
    dict
        The block with one more entry, ``natural``.
    """
    natural = {}
    for name in RATIO_FIELDS:
        if name in block:
            value = block[name]
            natural[name] = value if value is None or not ratio else _exp(value)
    return {**block, "natural": natural}


def _exp(value: float) -> float | None:
    """Exponential, None where it leaves the range of a double."""
    return math.exp(value) if value < 709 else None
