"""Proofs of a single maximum, held against the likelihood of contrasts from SciPy's multivariate normal."""

import numpy as np
import pytest
from scipy.linalg import null_space
from scipy.stats import multivariate_normal

from treering.pooling import pool
from treering.pooling.ascent import single_maximum
from treering.pooling.batch import Batch
from treering.pooling.moments import fit


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
    best, left = single_maximum(batch, fit(batch, np.zeros(25)), restricted=restricted)
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
            assert single_maximum(one, fit(one, np.zeros(1)), restricted=restricted)[1].size == 1
            found = pool(y, v, tau2=method).tau2
            assert heights(y, v, [found], restricted)[0] >= height.max() - 1e-9
    assert several > 5
