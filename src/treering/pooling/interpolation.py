"""Inverse interpolation: the place t where a known quantity r(t) is zero.

Where r is nearly linear in t, t is a tame function of r. A polynomial in r is led through all places visited
so far, by Newton's divided differences (Abramowitz and Stegun 25.2, from memory), and read at r = 0. Each
new place multiplies the error by about its own distance from the root.
"""

from __future__ import annotations

import numpy as np

from treering.pooling.result import FloatArray


class Course:
    """Polynomials t(r), one for each synthesis, that grow by one point at a time.

    Parameters
    ----------
    nodes : list of ndarray, shape (g,)
        Values of r; one that comes twice in a row stands for a place where the slope is known too.
    factors : list of ndarray, shape (g,)
        Divided differences of t on the first node, the first two, and so on.
    """

    def __init__(self, nodes: list[FloatArray], factors: list[FloatArray]) -> None:
        self._nodes = nodes
        self._factors = factors

    @classmethod
    def touching(cls, r: FloatArray, t: FloatArray, rate: FloatArray) -> Course:
        """Straight line through a place with known slope `rate`, which is dt/dr."""
        return cls([r, r], [t, rate])

    def touch(self, r: FloatArray, t: FloatArray, rate: FloatArray) -> None:
        """Let a straight line also pass through a second place, with its slope: it becomes a cubic."""
        (start, _), (before, rate_before) = self._nodes, self._factors
        wide = r - start
        mean_rate = (t - before) / wide
        bend = (mean_rate - rate_before) / wide
        self._nodes += [r, r]
        self._factors += [bend, ((rate - mean_rate) / wide - bend) / wide]

    def at(self, r: FloatArray | float) -> tuple[FloatArray, FloatArray]:
        """Read t at r; with it comes the product of the distances from r to all nodes."""
        t, product = self._factors[0], r - self._nodes[0]
        for factor, node in zip(self._factors[1:], self._nodes[1:], strict=True):
            t = t + factor * product
            product = product * (r - node)
        return t, product

    def root(self) -> FloatArray:
        """Read t where r is zero."""
        return self.at(0.0)[0]

    def lead_through(self, r: FloatArray, t: FloatArray) -> None:
        """Let the curve pass through one more point; a point that is a node already adds nothing."""
        on_curve, product = self.at(r)
        self._nodes.append(r)
        gap = t - on_curve
        self._factors.append(np.divide(gap, product, out=np.zeros_like(gap), where=product != 0.0))
