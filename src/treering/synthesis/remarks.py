"""What a reader must be told beside the numbers: imputed shares, holds, refusals, open readings."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from datetime import date
from typing import Any

from treering.pooling import PooledEffect
from treering.synthesis.arms import COUNTED_TWICE
from treering.synthesis.estimates import Estimated
from treering.synthesis.unresolved import OpenReading


def imputed_share(estimated: Estimated, planned: PooledEffect | None) -> dict[str, Any]:
    """Return how much of the main analysis rests on imputed numbers.

    Parameters
    ----------
    estimated : Estimated
        Effects of the outcome.
    planned : PooledEffect or None
        The planned analysis of the main trials.

    Returns
    -------
    dict
        ``trials`` (ids), ``k`` (of how many), ``share`` of the trials and ``weight`` of the planned weights;
        both None without a trial.
    """
    main = estimated.main
    imputed = [row.trial for row in main if row.imputed]
    if planned is None:
        return {"trials": imputed, "k": len(main), "share": None, "weight": None}
    weight = sum(w for row, w in zip(main, planned.weights, strict=True) if row.imputed)
    return {
        "trials": imputed,
        "k": len(main),
        "share": len(imputed) / len(main),
        "weight": float(weight),
    }


def warnings(
    estimated: Estimated,
    planned: PooledEffect | None,
    imputed: Mapping[str, Any],
    unsettled: Sequence[OpenReading],
    day: str,
) -> list[str]:
    """Return the sentences that are printed under the headline.

    Parameters
    ----------
    estimated : Estimated
        Effects of the outcome.
    planned : PooledEffect or None
        The planned analysis.
    imputed : mapping
        What `imputed_share` gave.
    unsettled : sequence of OpenReading
        Readings that wait for a decision.
    day : str
        ISO date of the version, for the age of holds.

    Returns
    -------
    list of str
    """
    told = list(planned.remarks) if planned else ["no trial with a usable result"]
    if imputed["trials"]:
        count = f"{len(imputed['trials'])} of {imputed['k']} trials"
        told.append(f"imputed numbers: {count}, with {100 * imputed['weight']:.0f}% of the weight")
    for row in estimated.rows:
        if row.status == COUNTED_TWICE:
            told.append(f"{row.label} is left out: {row.left_out}")
        if row.status == "on hold":
            told.append(_hold(row.label, row.held_since, day))
    return [*told, *_open(unsettled)]


def _hold(label: str, since: str | None, day: str) -> str:
    if since is None:
        return f"{label} is on hold"
    days = (date.fromisoformat(day) - date.fromisoformat(since)).days
    return f"{label} has been on hold for {days} days; a hold is to be settled, not kept"


def _open(unsettled: Sequence[OpenReading]) -> Iterator[str]:
    for trial in sorted({reading.trial for reading in unsettled}):
        readers = " and ".join(reading.reader for reading in unsettled if reading.trial == trial)
        yield (
            f"trial {trial} is not in the analysis as {readers} read it: their difference is unresolved, and "
            "both readings are tried below"
        )
