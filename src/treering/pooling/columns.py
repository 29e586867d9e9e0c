"""Results of many syntheses as columns, one for each field of `PooledEffect`."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from treering.pooling.batch import IntArray
from treering.pooling.result import FloatArray

Columns = dict[str, Any]
"""An array for each field, or one value that holds for every synthesis."""


def join(parts: Sequence[Columns], fields: Iterable[str]) -> Columns:
    """Put the columns of several batches one below the other.

    Parameters
    ----------
    parts : sequence of dict
        Results of `pool_batch`, weights apart.
    fields : iterable of str
        Columns to take.

    Returns
    -------
    dict
        One array for each field; one plain value where it holds for every synthesis.
    """
    return {
        name: _join_one([part[name] for part in parts], [part["k"].size for part in parts]) for name in fields
    }


def _join_one(pieces: list[Any], sizes: list[int]) -> Any:
    if len(pieces) == 1 or not any(isinstance(piece, np.ndarray) for piece in pieces):
        return pieces[0]
    words = (
        np.full(size, piece, dtype=object) if isinstance(piece, str) else piece
        for piece, size in zip(pieces, sizes, strict=True)
    )
    return np.concatenate(list(words))


def split_weights(weights: FloatArray, counts: IntArray) -> npt.NDArray[np.object_]:
    """One array of weights for each synthesis, without the padding."""
    rows = np.ascontiguousarray(weights.T)
    if (counts == rows.shape[1]).all():
        return np.fromiter(rows, dtype=object, count=counts.size)
    cut = (row[:count] for row, count in zip(rows, counts.tolist(), strict=True))
    return np.fromiter(cut, dtype=object, count=counts.size)
