"""Published cases (with their source, tests/published/effect_cases.json) and small table builders."""

import json
from pathlib import Path

import pandas as pd
import pytest

COUNTS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]
MEANS = [f"{arm}_{field}" for arm in ("intervention", "comparator") for field in ("mean", "sd", "total")]
INTERVAL = ["estimate", "ci_low", "ci_high"]


@pytest.fixture(scope="session")
def cases():
    """All published cases by their number."""
    return json.loads((Path(__file__).parents[1] / "published" / "effect_cases.json").read_text())


@pytest.fixture(scope="session")
def case_table(cases):
    """The data of a case under the column names of the contract."""

    def table(name, columns):
        return pd.DataFrame(cases[name]["data"]["rows"], columns=columns)

    return table


@pytest.fixture(scope="session")
def agree(cases):
    """Every printed value of a case agrees within its printed digits."""

    def check(name, found):
        case = cases[name]
        assert set(found) == set(case["expected"])
        for field, value in case["expected"].items():
            assert found[field] == pytest.approx(value, rel=0, abs=case["tolerance"][field]), (name, field)

    return check


@pytest.fixture(scope="session")
def counts():
    """One row for each quadruple: events and total of intervention and comparator."""

    def table(*rows, index=None):
        return pd.DataFrame(rows, columns=COUNTS, index=index, dtype=float)

    return table


@pytest.fixture(scope="session")
def means():
    """One row for each sextuple: mean, SD and total of intervention and comparator."""

    def table(*rows, index=None):
        return pd.DataFrame(rows, columns=MEANS, index=index, dtype=float)

    return table


@pytest.fixture(scope="session")
def intervals():
    """One row for each triple: estimate with its interval."""

    def table(*rows, index=None):
        return pd.DataFrame(rows, columns=INTERVAL, index=index, dtype=float)

    return table
