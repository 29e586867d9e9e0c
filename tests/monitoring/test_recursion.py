"""The integration underneath: equal and narrowing panels agree, and no probability is lost."""

import itertools
import math

import numpy as np
import pytest
from scipy import stats

from treering.errors import NotConvergedError
from treering.monitoring import panels, recursion
from treering.monitoring.recursion import advance, density, mirrored, start, tail, tail_bound


def carried(steps, edge=1.5, drift=0.0):
    paths = start()
    for now, after in itertools.pairwise(steps):
        paths = advance(paths, now, [(-edge, edge)], after, drift=drift)
    return paths


def test_before_the_first_look_the_tail_is_the_normal_one():
    assert tail(start(), 4.0, 3.0, drift=0.5) == pytest.approx(stats.norm.sf(0.5), rel=1e-13)
    assert tail_bound(start(), 4.0, 1e-12) == pytest.approx(2.0 * stats.norm.isf(1e-12), rel=1e-12)


@pytest.mark.parametrize("drift", [0.0, 1.7])
def test_what_is_inside_and_what_left_add_up_to_one(drift):
    paths, out = start(), 0.0
    for now, after in [(0.3, 0.31), (0.31, 0.7), (0.7, 1.0)]:
        out += tail(paths, now, 1.5, drift=drift) + tail(mirrored(paths), now, 1.5, drift=-drift)
        paths = advance(paths, now, [(-1.5, 1.5)], after, drift=drift)
        assert paths.mass.sum() + out == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize("gap", [1e-2, 1e-4, 1e-6])
def test_narrowing_panels_carry_the_same_density_as_equal_ones(monkeypatch, gap):
    steps = [0.3, 0.5, 0.5 + gap, 0.8, 1.0]
    scores = np.linspace(-3.0, 3.0, 41)
    monkeypatch.setattr(panels, "_EQUAL_PANELS", 1)
    narrowing = carried(steps, drift=0.8)
    monkeypatch.setattr(panels, "_EQUAL_PANELS", 300 if gap == 1e-6 else 10**6)
    equal = carried(steps, drift=0.8)
    assert density(narrowing, 1.0, scores) == pytest.approx(density(equal, 1.0, scores), abs=1e-10)
    for score in (0.4, 1.5, 4.0):
        assert tail(narrowing, 1.0, score) == pytest.approx(tail(equal, 1.0, score), rel=1e-8)


@pytest.mark.parametrize("edge", [1.5, 3.0])
def test_summing_near_nodes_only_leaves_nothing_out(monkeypatch, edge):
    steps = [0.1, 0.2, 0.201, 0.2015, 1.0]
    near = carried(steps, edge, drift=0.5)
    assert near.nodes.size**2 > recursion._DENSE
    monkeypatch.setattr(recursion, "_DENSE", 10**9)
    every = carried(steps, edge, drift=0.5)
    assert near.mass == pytest.approx(every.mass, rel=1e-9, abs=1e-30)


def test_mirroring_turns_the_density():
    paths = carried([0.3, 0.5, 1.0], drift=1.0)
    scores = np.linspace(-2.0, 2.0, 9)
    assert density(mirrored(paths), 1.0, -scores) == pytest.approx(density(paths, 1.0, scores), rel=1e-12)


def test_more_than_is_left_cannot_leave():
    paths = advance(start(), 1.0, [(0.0, 1.0)], 2.0)
    with pytest.raises(NotConvergedError, match="No bound"):
        tail_bound(paths, 2.0, 0.9)


def test_a_closed_region_holds_no_paths():
    paths = advance(start(), 1.0, [(1.0, 1.0)], 2.0)
    assert paths.mass.sum() == 0.0
    assert tail(paths, 2.0, 0.0) == 0.0
    assert math.isinf(tail_bound(paths, 2.0, 0.0))
