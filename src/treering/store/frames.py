"""The evidence as pandas frames, as of a version, of a day it was known, or of a day it was true."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from treering.store.opening import open_store
from treering.terms import EntryKind


def frames_as_of(
    place: str | Path,
    *,
    version: int | None = None,
    known: str | None = None,
    true: str | None = None,
    history: bool = False,
) -> dict[str, pd.DataFrame]:
    """Read the evidence as of one moment as frames, one for each kind of entry.

    Parameters
    ----------
    place : str or Path
        Path of a SQLite store or a PostgreSQL URL.
    version : int, optional
        As the numbered version saw it.
    known : str, optional
        As the team knew it at the end of this ISO date (UTC), or at this date-time: what was said then.
    true : str, optional
        What was true in the world by this ISO date: what could have been said.
    history : bool
        With the replaced and withdrawn entries.

    Returns
    -------
    dict of str to DataFrame
        Kind of entry to its entries; the columns are those of :meth:`State.frame`. All limits hold together.

    Raises
    ------
    StoreError
        When there is no store or no such version, or a date cannot be read.
    """
    with open_store(place) as store:
        state = store.state(version=version, known=known, true=true)
    return {kind.value: state.frame(kind, history=history) for kind in EntryKind}
