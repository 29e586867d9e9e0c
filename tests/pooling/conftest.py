"""Published trials (tests/published/pooled_trials.toml) under the column names of the package."""

import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from treering.effects import effect_sizes

PUBLISHED = Path(__file__).parents[1] / "published" / "pooled_trials.toml"
Z95 = 1.959963984540054


@pytest.fixture(scope="session")
def trials():
    """Give the published table of this name."""
    data = tomllib.loads(PUBLISHED.read_text())

    def table(name):
        found = data[name]
        return pd.DataFrame(found["rows"], columns=found["columns"], index=found.get("labels"))

    return table


@pytest.fixture(scope="session")
def effects_of(trials):
    """Give estimates and variances of the published table of this name as two arrays."""

    def arrays(name, measure, **options):
        table = trials(name)
        if measure == "ratio-interval":
            logs = np.log(table)
            return logs["ratio"].to_numpy(), ((logs["high"] - logs["low"]) / (2 * Z95)).to_numpy() ** 2
        found = effect_sizes(table, measure, **options)
        return found["estimate"].to_numpy(), found["variance"].to_numpy()

    return arrays


@pytest.fixture(scope="session")
def random_syntheses():
    """Draw estimates and variances of several syntheses, shape (g, k) each."""

    def draw(seed, g, k, tau2=0.1):
        rng = np.random.default_rng(seed)
        v = rng.lognormal(-2.0, 0.8, (g, k))
        return rng.normal(0.2, np.sqrt(v + tau2)), v

    return draw
