"""Proofs that a likelihood in tau2 has one maximum at most, from readings of its slope.

On contrasts free of the mean the model has variances lambda_j + t, so with u_j = 1 / (lambda_j + t) the slope
of the restricted likelihood is (A - B) / 2, A = sum z_j^2 u_j^2, B = sum u_j; the full likelihood has
B = sum w. Write Q = sum z_j^2 u_j, C = -B' (sum u_j^2, or sum w^2) and E = -A' / 2 = sum z_j^2 u_j^3.

Above t. Where A = B, Cauchy and Schwarz give E >= A^2 / Q = B^2 / Q, so the slope falls through zero there
if Q < 2 B^2 / C. Q falls in t and B^2 / C rises (the same inequality on sums of u). If it holds at t it
therefore holds beyond: from t on there is one maximum at most, and none if the slope is not above zero at t.

Below t. Means of power -2 and -1 are concave, so f = A^(-1/2) and g = 1 / B are concave and rise: chords lie
below them, tangents above, and where all lambda_j are equal they are straight lines. A zero of the slope is a
place where f^2 = g. None lies between two places if tangents of f, squared, stay below the chord of g, or if
the chord of f, squared, stays above tangents of g. The slope falls through every zero between two places if
2 f f' > g' there, for which twice the root of g at the left, times f' at the right, above g' at the left is
enough.

The stretch from 0 to t is cut into parts where its ends do not tell enough, and the parts that still hide
something are cut again. Derived here, no source.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from treering.pooling.batch import Batch, IntArray
from treering.pooling.likelihood import Slope, slope
from treering.pooling.result import FloatArray

BoolArray = npt.NDArray[np.bool_]
SURE = 2.0 - 1e-6
"""The 2 of the first proof, less what rounding could add to the sums."""
AIM = 1.98
"""Where to step to: a little beyond, or two trials would end exactly on the edge."""
PARTS = (8, 8)
"""Parts into which a stretch is cut whose ends do not tell enough, then each part that still does not."""
TINY = np.finfo(np.float64).tiny


class Stretch(NamedTuple):
    """Stretches of tau2 with the slope read at both ends.

    Attributes
    ----------
    begin, width : ndarray, shape (g,)
        Left end and length.
    left, right : Slope
        Terms of the slope at the ends.
    """

    begin: FloatArray
    width: FloatArray
    left: Slope
    right: Slope

    def columns(self, which: IntArray) -> Stretch:
        """Take the stretches at these positions."""
        ends = self.left.columns(which), self.right.columns(which)
        return Stretch(self.begin[which], self.width[which], *ends)


def one_at_most(there: Slope) -> BoolArray:
    """Whether the likelihood has one maximum at most from here on."""
    single: BoolArray = there.q * there.fall_b < SURE * there.b * there.b
    return single


def threshold(there: Slope) -> FloatArray:
    """About how much further on one maximum at most is proved: Newton's step to Q = AIM B^2 / C."""
    excess = there.q * there.fall_b / (AIM * there.b * there.b) - 1.0
    step: FloatArray = there.q / np.maximum(there.a, TINY) * np.maximum(excess, 0.0)
    return step


def hiding(batch: Batch, owner: IntArray, at: Stretch, *, restricted: bool) -> IntArray:
    """List the syntheses whose slope may cross zero more often than its signs at the ends of a stretch tell.

    Parameters
    ----------
    batch : Batch
        Syntheses.
    owner : ndarray of int, shape (s,)
        Position in the batch of the synthesis that each stretch belongs to.
    at : Stretch
        The stretches.
    restricted : bool
        True for REML, False for ML.

    Returns
    -------
    ndarray of int
        Positions in the batch, each once or more often, of those for which it is not ruled out.
    """
    hidden = np.flatnonzero(~_shown(at))
    at, owner = at.columns(hidden), owner[hidden]
    for parts in PARTS:
        if owner.size == 0:
            break
        at = _cut(batch, owner, at, parts, restricted)
        hidden = np.flatnonzero(~_shown(at))
        at, owner = at.columns(hidden), np.tile(owner, parts)[hidden]
    return owner


class _Ends(NamedTuple):
    """Values of one concave rising term at both ends of stretches, and its slopes there."""

    left: FloatArray
    right: FloatArray
    left_slope: FloatArray
    right_slope: FloatArray

    def columns(self, which: IntArray) -> _Ends:
        """Take the stretches at these positions."""
        return _Ends(*(term[which] for term in self))

    def tangents_meet(self, width: FloatArray) -> FloatArray:
        """How far from the left end the tangents meet."""
        gap = self.right - self.left - self.right_slope * width
        meet = gap / np.maximum(self.left_slope - self.right_slope, TINY)
        return np.minimum(np.maximum(meet, 0.0), width)


def _shown(at: Stretch) -> BoolArray:
    """Whether both ends of a stretch tell all; a stretch that hides nothing only falls or keeps its sign."""
    left, right, width = at.left, at.right, at.width
    f, g = _root_terms(left, right), _trace_terms(left, right)
    rises = left.a > left.b, right.a > right.b
    falls = 2.0 * np.sqrt(np.maximum(g.left, f.left * f.left)) * f.right_slope > g.left_slope
    up = rises[0] & rises[1] & _stays_below(f, g, width)
    shown: BoolArray = falls | up
    down = np.flatnonzero(~(shown | rises[0] | rises[1]))
    if down.size:
        shown[down] = _stays_above(f.columns(down), g.columns(down), width[down])
    return shown


def _root_terms(left: Slope, right: Slope) -> _Ends:
    roots = 1.0 / np.sqrt(left.a), 1.0 / np.sqrt(right.a)
    return _Ends(*roots, 0.5 * roots[0] * left.fall_a / left.a, 0.5 * roots[1] * right.fall_a / right.a)


def _trace_terms(left: Slope, right: Slope) -> _Ends:
    return _Ends(
        1.0 / left.b, 1.0 / right.b, left.fall_b / (left.b * left.b), right.fall_b / (right.b * right.b)
    )


def _stays_below(f: _Ends, g: _Ends, width: FloatArray) -> BoolArray:
    """Whether tangents of f, squared, stay below the chord of g: the worst place is where they meet."""
    meet = f.tangents_meet(width)
    tangent, chord = f.left + f.left_slope * meet, g.left + (g.right - g.left) * (meet / width)
    below: BoolArray = tangent * tangent < chord
    return below


def _stays_above(f: _Ends, g: _Ends, width: FloatArray) -> BoolArray:
    """Whether the chord of f, squared, stays above tangents of g, each from its end to where they meet.

    The distance from a tangent is convex, and least where 2 f times the chord's slope is the tangent's slope.
    """
    meet, rate = g.tangents_meet(width), (f.right - f.left) / width
    above = np.ones(width.size, dtype=np.bool_)
    for value, slope_, origin, low, high in (
        (g.left, g.left_slope, 0.0, 0.0, meet),
        (g.right, g.right_slope, width, meet, width),
    ):
        lowest = np.minimum(np.maximum((slope_ / (2.0 * rate) - f.left) / rate, low), high)
        chord = f.left + rate * lowest
        above &= chord * chord > value + slope_ * (lowest - origin)
    return above


def _cut(batch: Batch, owner: IntArray, at: Stretch, parts: int, restricted: bool) -> Stretch:
    """Cut stretches of these syntheses into parts and read the slope at every cut; first parts come first."""
    width = at.width / parts
    cuts = (at.begin + np.arange(1.0, parts)[:, None] * width).ravel()
    read = slope(batch, cuts, restricted=restricted, owner=np.tile(owner, parts - 1))
    course = [np.concatenate(terms) for terms in zip(at.left, read, at.right, strict=True)]
    left = Slope(*(term[: -width.size] for term in course))
    right = Slope(*(term[width.size :] for term in course))
    return Stretch(np.concatenate([at.begin, cuts]), np.tile(width, parts), left, right)
