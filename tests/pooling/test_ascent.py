"""Proofs of a single maximum, held against the likelihood of contrasts from SciPy's multivariate normal."""

import numpy as np
import pytest
from scipy.linalg import null_space
from scipy.stats import multivariate_normal

from treering.pooling import pool
from treering.pooling.ascent import single_maximum
from treering.pooling.batch import Batch
from treering.pooling.likelihood import slope
from treering.pooling.moments import centre


def batch_of(y, v):
    return Batch(y - y[0], v, np.full(y.shape[1], float(len(y))))


def heights(y, v, grid, restricted):
    """Log-likelihood at every tau2 of the grid: of contrasts (REML), or of y at its best mean (ML)."""
    found = []
    for t in grid:
        if restricted:
            contrasts = null_space(np.ones((1, y.size)))
            spread = contrasts.T @ np.diag(v + t) @ contrasts
            found.append(multivariate_normal.logpdf(contrasts.T @ y, cov=spread))
        else:
            mean = np.average(y, weights=1 / (v + t))
            found.append(multivariate_normal.logpdf(y, mean=np.full(y.size, mean), cov=np.diag(v + t)))
    return np.array(found)


def proved_maxima(batch, restricted):
    """What `single_maximum` finds, from the slope at zero on."""
    zero = slope(batch, np.zeros(batch.k.size), restricted=restricted)
    return single_maximum(batch, zero, restricted=restricted)


def peaks(height):
    """Places on the grid that are higher than both neighbours."""
    padded = np.concatenate([[-np.inf], height, [-np.inf]])
    return np.flatnonzero((padded[1:-1] > padded[:-2]) & (padded[1:-1] > padded[2:]))


@pytest.mark.parametrize("restricted", [True, False], ids=["REML", "ML"])
@pytest.mark.parametrize(("spread", "k"), [(0.8, 20), (1.5, 5), (3.0, 4)])
def test_where_one_maximum_is_proved_a_dense_grid_shows_one_and_the_same(restricted, spread, k):
    rng = np.random.default_rng(k)
    v = rng.lognormal(-2.0, spread, (k, 25))
    y = rng.normal(0.0, np.sqrt(v + rng.choice([0.0, 0.05, 1.0], 25)))
    batch = batch_of(y, v)
    best, left = proved_maxima(batch, restricted)
    proved = np.setdiff1d(np.arange(25), left)
    assert proved.size > 12
    grid = np.concatenate([[0.0], np.geomspace(1e-5, 100.0, 150)])
    for column in proved:
        (peak,) = peaks(heights(y[:, column], v[:, column], grid, restricted))
        below, above = grid[max(peak - 1, 0)], grid[min(peak + 1, grid.size - 1)]
        assert below <= best[column] <= above


@pytest.mark.parametrize(("method", "restricted"), [("reml", True), ("ml", False)])
def test_where_there_are_two_maxima_nothing_is_proved_and_the_higher_is_taken(method, restricted):
    rng = np.random.default_rng(8)
    grid = np.concatenate([[0.0], np.geomspace(1e-5, 100.0, 80)])
    several = 0
    for _ in range(80):
        # Two precise trials that agree and others far apart: a maximum at small and another at large tau2.
        v = np.concatenate([rng.lognormal(-6.0, 0.5, 2), rng.lognormal(0.0, 0.5, 4)])
        y = np.concatenate([rng.normal(0.0, 0.1, 2), rng.normal(0.0, 3.0, 4)])
        height = heights(y, v, grid, restricted)
        if peaks(height).size > 1:
            several += 1
            one = batch_of(y[:, None], v[:, None])
            assert proved_maxima(one, restricted)[1].size == 1
            found = pool(y, v, tau2=method).tau2
            assert heights(y, v, [found], restricted)[0] >= height.max() - 1e-9
    assert several > 5


def rises(y, v, t, restricted):
    """Whether the likelihood rises at t; its derivative written out for one mean and diagonal variances."""
    w = 1.0 / (v + t)
    total = w.sum(axis=0)
    pull = w * (y - (w * y).sum(axis=0) / total)
    trace = total - (w * w).sum(axis=0) / total if restricted else total
    return (pull * pull).sum(axis=0) > trace


def clusters(rng, k, count):
    """Half of the trials precise and alike, half of them neither: often two maxima."""
    half = k // 2
    v = np.vstack([rng.lognormal(-6.0, 0.5, (half, count)), rng.lognormal(0.0, 0.5, (k - half, count))])
    return np.vstack([rng.normal(0.0, 0.1, (half, count)), rng.normal(0.0, 3.0, (k - half, count))]), v


@pytest.mark.parametrize("restricted", [True, False], ids=["REML", "ML"])
@pytest.mark.parametrize("k", [2, 3, 4, 6, 11])
def test_nothing_false_is_proved_where_half_of_the_likelihoods_have_several_maxima(restricted, k):
    rng, count = np.random.default_rng(k), 600
    y, v = clusters(rng, k, count)
    batch, _ = centre(Batch(y, v, np.full(count, float(k))))
    best, left = proved_maxima(batch, restricted)
    grid = v.min(axis=0) * np.expm1(np.linspace(0.0, 1.0, 500)[:, None] * np.log(1e3 / v.min(axis=0)))
    up = np.array([rises(y, v, t, restricted) for t in grid])
    tops = up[:-1] & ~up[1:]
    several = tops.sum(axis=0) + ~up[0] > 1
    proved = np.setdiff1d(np.arange(count), left)
    assert proved.size > count / 20
    assert not several[proved].any()
    place, columns = np.where(tops.any(axis=0), np.argmax(tops, axis=0), 0)[proved], proved
    high = np.where(up[0][proved], grid[place + 1, columns], 0.0)
    assert np.all(np.where(up[0][proved], grid[place, columns], 0.0) <= best[proved])
    assert np.all(best[proved] <= high)
    if k > 3:
        assert several.sum() > count / 20


def test_two_trials_need_no_search():
    # REML of two trials has a closed form: half the squared difference less the mean variance
    rng = np.random.default_rng(2)
    v = rng.lognormal(-2.0, 1.0, (2, 200))
    y = rng.normal(0.0, 1.0, (2, 200))
    batch, _ = centre(Batch(y, v, np.full(200, 2.0)))
    best, left = proved_maxima(batch, True)
    assert left.size == 0
    closed = np.maximum(((y[0] - y[1]) ** 2 - v.sum(axis=0)) / 2.0, 0.0)
    assert best == pytest.approx(closed, rel=1e-10, abs=1e-12)
