"""Charge what is used of a joined arm to the arms in it, so that nobody counts once alone and once joined."""

from __future__ import annotations

from collections.abc import Hashable
from typing import Any

import numpy as np
import pandas as pd

from treering.errors import AnalysisError

Row = dict[Hashable, Any]
_NOISE = 1e-9


def by_single_arms(arms: pd.DataFrame, uses: pd.DataFrame) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Replace joined arms by the arms in them.

    Participants are charged in proportion to the numbers randomised, events in proportion to the events of
    the arms where these are known.

    Parameters
    ----------
    arms : DataFrame
        ``trial``, ``arm``, ``randomised``, ``joins`` (list of arm names, empty for a single arm) and, if
        known, ``events``.
    uses : DataFrame
        ``trial``, ``arm``, ``participants`` and, for binary outcomes, ``events``.

    Returns
    -------
    tuple of DataFrame
        The single arms, and the uses charged to single arms.

    Raises
    ------
    AnalysisError
        If a joined arm names an arm that is none of its trial or is joined itself, names one twice, or has
        more people than the arms in it.
    """
    listed: dict[tuple[Hashable, Hashable], Row] = {
        (row["trial"], row["arm"]): row for row in arms.to_dict("records")
    }
    parts = {key: _parts(row, listed) for key, row in listed.items() if _names(row)}
    charged = [
        share
        for use in uses.to_dict("records")
        for share in _shares(use, parts.get((use["trial"], use["arm"]), []))
    ]
    single = [(trial, arm) not in parts for trial, arm in zip(arms["trial"], arms["arm"], strict=True)]
    return arms[single], pd.DataFrame(charged, columns=uses.columns).astype(uses.dtypes.to_dict())


def _names(row: Row) -> list[Hashable]:
    joins = row["joins"]
    if isinstance(joins, list | tuple):
        return list(joins)
    if joins is None or pd.isna(joins):
        return []
    raise _fault(row, joins, "is no list of arms", "a list of names, empty for a single arm")


def _parts(row: Row, listed: dict[tuple[Hashable, Hashable], Row]) -> list[Row]:
    names = _names(row)
    found = [listed.get((row["trial"], name)) for name in names]
    parts = [part for part in found if part is not None and not _names(part)]
    if len(parts) < len(names) or len(set(names)) < len(names):
        raise _fault(row, names, "does not name single arms of the trial, each once", "its single arms")
    whole = sum(part["randomised"] for part in parts)
    if row["randomised"] > whole * (1 + _NOISE):
        raise _fault(row, row["randomised"], "has more people than its arms", f"at most {whole:g}")
    return parts


def _shares(use: Row, parts: list[Row]) -> list[Row]:
    if not parts:
        return [use]
    people = _proportions([part["randomised"] for part in parts])
    shares = [
        {**use, "arm": part["arm"], "participants": use["participants"] * share}
        for part, share in zip(parts, people, strict=True)
    ]
    if "events" in use:
        events = _proportions([part["events"] for part in parts]) or people
        for given, share in zip(shares, events, strict=True):
            given["events"] = use["events"] * share
    return shares


def _proportions(numbers: list[float]) -> list[float]:
    """Proportions of the whole; none where a number is not known or all are zero."""
    whole = sum(numbers)
    return [number / whole for number in numbers] if np.isfinite(whole) and whole > 0 else []


def _fault(row: Row, found: object, problem: str, expected: str) -> AnalysisError:
    return AnalysisError(
        f"joins: arm {row['arm']} {problem}.", trial=str(row["trial"]), found=found, expected=expected
    )
