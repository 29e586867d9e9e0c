"""Many syntheses laid side by side as one rectangle of numbers.

Trials run down (axis 0) and syntheses across (axis 1), so that every sum over trials is a handful of long
vector additions. An absent trial has estimate 0 and variance infinity: its weight is exactly zero and no
mask has to be carried through the sums.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from treering.pooling.result import FloatArray

IntArray = npt.NDArray[np.intp]

CHUNK_NUMBERS = 131_072
"""Numbers in one rectangle, which bounds memory; sums over it are made in smaller blocks."""


@dataclass(frozen=True)
class Batch:
    """Padded estimates and variances of several syntheses.

    Attributes
    ----------
    y, v : ndarray, shape (n, g)
        Estimates and variances; 0 and infinity where a synthesis has fewer than n trials.
    k : ndarray, shape (g,)
        Trials in each synthesis.
    """

    y: FloatArray
    v: FloatArray
    k: FloatArray

    def columns(self, which: IntArray) -> Batch:
        """Take the syntheses at these positions."""
        # Plain indexing would give arrays laid out the other way round, on which every sum is slow.
        return Batch(self.y.take(which, axis=1), self.v.take(which, axis=1), self.k[which])


def single(y: FloatArray, v: FloatArray) -> Batch:
    """One synthesis as a rectangle of one column."""
    return Batch(y[:, None], v[:, None], np.array([float(y.size)]))


def from_mask(y: FloatArray, v: FloatArray, present: npt.NDArray[np.bool_]) -> Batch:
    """Several selections of the same trials, for example all but one.

    Parameters
    ----------
    y, v : ndarray, shape (n,)
        All trials.
    present : ndarray of bool, shape (n, g)
        Column j marks the trials of selection j.

    Returns
    -------
    Batch
        One synthesis for each column.
    """
    return Batch(
        np.where(present, y[:, None], 0.0),
        np.where(present, v[:, None], np.inf),
        present.sum(axis=0, dtype=np.float64),
    )


def chunks(counts: IntArray) -> Iterator[slice]:
    """Cut a run of syntheses into slices that each fill about one rectangle.

    Parameters
    ----------
    counts : ndarray of int, shape (g,)
        Trials in each synthesis.

    Yields
    ------
    slice
        Consecutive syntheses; at least one, however long it is.
    """
    total, tallest = int(counts.sum()), int(counts.max())
    pieces = -(-total // CHUNK_NUMBERS)
    fill = max(tallest, -(-total // pieces))  # pieces of like size share the cores well
    if total == tallest * counts.size:
        yield from even(counts.size, max(1, fill // tallest))
        return
    start = 0
    while start < counts.size:
        # The rectangle is as tall as its longest synthesis, so the running maximum decides the width.
        window = counts[start : start + fill]
        height = np.maximum.accumulate(window)
        fits = height * np.arange(1, window.size + 1) <= fill
        width = max(1, int(np.argmin(fits)) if not fits.all() else window.size)
        yield slice(start, start + width)
        start += width


def pack(y: FloatArray, v: FloatArray, counts: IntArray) -> Batch:
    """Lay consecutive runs of trials side by side.

    Parameters
    ----------
    y, v : ndarray, shape (sum of counts,)
        Trials, those of one synthesis next to each other.
    counts : ndarray of int, shape (g,)
        Trials in each synthesis.

    Returns
    -------
    Batch
        The padded rectangle.
    """
    tall, wide = int(counts.max()), counts.size
    if (counts == tall).all():
        return Batch(
            np.ascontiguousarray(y.reshape(wide, tall).T),
            np.ascontiguousarray(v.reshape(wide, tall).T),
            counts.astype(np.float64),
        )
    present = np.arange(tall) < counts[:, None]
    padded_y, padded_v = np.zeros((wide, tall)), np.full((wide, tall), np.inf)
    padded_y[present], padded_v[present] = y, v
    return Batch(
        np.ascontiguousarray(padded_y.T), np.ascontiguousarray(padded_v.T), counts.astype(np.float64)
    )


def spans(count: int, tall: int) -> Iterator[slice]:
    """Cut `count` syntheses of equal height into slices that each fill about one rectangle.

    Parameters
    ----------
    count : int
        Number of syntheses.
    tall : int
        Trials in each.

    Returns
    -------
    iterator of slice
        Consecutive syntheses.
    """
    return even(count, max(1, CHUNK_NUMBERS // tall))


def even(count: int, wide: int) -> Iterator[slice]:
    """Cut `count` places into slices of `wide` places; the last one may be narrower."""
    return (slice(start, min(start + wide, count)) for start in range(0, count, wide))
