"""Weighted sums that all estimators share: the generalised Q and what comes with it.

With weights w = 1 / (v + t) and mu their weighted mean, the generalised Q is Q(t) = sum w (y - mu)^2
(DerSimonian and Kacker 2007, Contemp Clin Trials 28:105, eq. 6). Q(0) is Cochran's Q.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from treering.pooling.batch import Batch, IntArray, even
from treering.pooling.result import FloatArray

BLOCK_NUMBERS = 28_672
"""Numbers read in one sweep: with what is made of them they stay in a core's second-level cache."""

Terms = tuple[FloatArray, ...]
Kernel = Callable[[FloatArray, FloatArray, FloatArray], Terms]


class Sums(NamedTuple):
    """Weighted sums at one tau2, shape (g,) each.

    Attributes
    ----------
    total : ndarray
        Sum of weights.
    mean : ndarray
        Weighted mean.
    q : ndarray
        Generalised Q.
    a : ndarray
        Sum of w^2 (y - mean)^2, which is -dQ/dt.
    """

    total: FloatArray
    mean: FloatArray
    q: FloatArray
    a: FloatArray

    def columns(self, which: IntArray) -> Sums:
        """Take the syntheses at these positions."""
        return Sums(*(term[which] for term in self))


def dot(a: FloatArray, b: FloatArray) -> FloatArray:
    """Sum over trials of the products, one number for each synthesis."""
    out: FloatArray = np.einsum("ij,ij->j", a, b)
    return out


def read(kernel: Kernel, batch: Batch, tau2: FloatArray, owner: IntArray | None = None) -> Terms:
    """Make sums over the trials of every synthesis, a block of syntheses at a time.

    Parameters
    ----------
    kernel : callable
        Takes y and v, shape (n, g), and tau2, shape (g,); gives sums of shape (g,), each from its own column.
    batch : Batch
        Syntheses.
    tau2 : ndarray, shape (g,)
        Between-trial variances.
    owner : ndarray of int, shape (g,), optional
        Position in the batch of the synthesis that each tau2 is meant for; all of them in turn if not given.

    Returns
    -------
    tuple of ndarray, shape (g,)
        The kernel's sums.
    """
    blocks = max(1, min(tau2.size, -(-len(batch.y) * tau2.size // BLOCK_NUMBERS)))
    wide = -(-tau2.size // blocks)
    pieces = [kernel(*_block(batch, cut, owner), tau2[cut]) for cut in even(tau2.size, wide)]
    return pieces[0] if len(pieces) == 1 else tuple(map(np.concatenate, zip(*pieces, strict=True)))


def _block(batch: Batch, cut: slice, owner: IntArray | None) -> tuple[FloatArray, FloatArray]:
    if owner is None:
        return batch.y[:, cut], batch.v[:, cut]
    # Plain indexing would give arrays laid out the other way round, on which every sum is slow.
    return batch.y.take(owner[cut], axis=1), batch.v.take(owner[cut], axis=1)


def weigh(v: FloatArray, tau2: FloatArray) -> FloatArray:
    """Weights 1 / (v + tau2), shape (n, g)."""
    w = v + tau2
    np.reciprocal(w, out=w)
    return w


LOPSIDED_SHARE = 0.999
"""Share of one trial in all weights from which on it is put first."""
LOPSIDED_SPREAD = 1e6
"""How many times the first variance may be the smallest one before the most precise trial is put first."""


def centre(batch: Batch) -> tuple[Batch, FloatArray]:
    """Measure each synthesis from its common-effect mean.

    First from the first trial, so that estimates that are all the same become exact zeros; then from the mean
    with weights 1 / v. Sums are made of plain squares of what is left: with mu the mean at any t, seen from
    there, mu^2 sum w is at most k times sum w (y - mu)^2 (every 1 / v is at most k times as large a share of
    its sum as w is), so that their difference keeps all but the last digits. Derived here, no source.

    Where one trial has nearly all the weight, or the first trial is very much less precise than another, the
    most precise trial changes places with the first: what is measured from a far less precise one loses its
    digits, and the sums hold the first weight apart from the others (`apart`).

    Parameters
    ----------
    batch : Batch
        Syntheses.

    Returns
    -------
    Batch
        The same with centred estimates, of which one may have changed places with the first.
    ndarray, shape (g,)
        What was taken off.
    """
    w, total, batch = _precise_first(batch)
    first, complete = batch.y[0], bool(batch.k.min() == len(batch.y))
    if not complete:
        present = np.isfinite(batch.v)
        first = batch.y[np.argmax(present, axis=0), np.arange(batch.k.size)]
    y = batch.y - first
    if not complete:
        y[~present] = 0.0
    mean = dot(w, y) / total
    y -= mean
    if not complete:
        y[~present] = 0.0
    return Batch(y, batch.v, batch.k), first + mean


def _precise_first(batch: Batch) -> tuple[FloatArray, FloatArray, Batch]:
    """Weights 1 / v, their sum, and the batch with the most precise trial first where that matters."""
    w = np.reciprocal(batch.v)
    total, largest = w.sum(axis=0), w.max(axis=0)
    lopsided = np.flatnonzero((largest > LOPSIDED_SHARE * total) | (largest > LOPSIDED_SPREAD * w[0]))
    lopsided = lopsided[batch.k[lopsided] > 1.0]
    if lopsided.size:
        top = np.argmax(w[:, lopsided], axis=0)
        y, v = batch.y.copy(), batch.v.copy()
        for values in (y, v, w):
            values[0, lopsided], values[top, lopsided] = values[top, lopsided], values[0, lopsided]
        batch = Batch(y, v, batch.k)
    return w, total, batch


def apart(first: FloatArray, rest: FloatArray, square: FloatArray, total: FloatArray) -> FloatArray:
    """Return sum w - sum w^2 / sum w without taking two nearly equal numbers from each other.

    Parameters
    ----------
    first : ndarray, shape (g,)
        Weight of the first trial, by far the largest one where any is (see `centre`).
    rest, square : ndarray, shape (g,)
        Sum of the other weights and of their squares.
    total : ndarray, shape (g,)
        Sum of all weights.

    Returns
    -------
    ndarray, shape (g,)
        (2 first rest + rest^2 - square) / total.
    """
    out: FloatArray = (rest * (first + total) - square) / total
    return out


def sums(batch: Batch, tau2: FloatArray) -> Sums:
    """Weighted mean and generalised Q of each synthesis at its tau2.

    Parameters
    ----------
    batch : Batch
        Syntheses, best as `centre` leaves them: digits are lost where the mean is far from zero.
    tau2 : ndarray, shape (g,)
        Between-trial variance.

    Returns
    -------
    Sums
        The sums.
    """
    return Sums(*read(_sums, batch, tau2))


def _sums(y: FloatArray, v: FloatArray, tau2: FloatArray) -> Terms:
    w = weigh(v, tau2)
    wy = w * y
    total, pull = w.sum(axis=0), wy.sum(axis=0)
    mean = pull / total
    q = dot(wy, y) - pull * mean
    a = dot(wy, wy) - mean * (2.0 * dot(w, wy) - mean * dot(w, w))
    return total, mean, q, a
