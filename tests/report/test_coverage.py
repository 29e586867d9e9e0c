"""Coverage of the reporting items is computed; what is missing is shown as missing."""

from __future__ import annotations

from dataclasses import replace

import pytest

from treering.report import build_view
from treering.report.coverage import counts, coverage
from treering.report.coverage_items import PRISMA
from treering.terms import CoverageState


def states(view):
    return {row["item"]: row["state"] for row in coverage(view)}


@pytest.fixture
def bare(view_of):
    view = view_of(1)
    return build_view(
        protocol=view.protocol,
        version=view.version,
        store_head=view.store_head,
        analyses=view.analyses,
        previous_analyses=None,
        changes=view.changes,
        status="living",
    )


def test_all_42_items_of_prisma_2020_are_listed(view_of):
    # Page et al., BMJ 2021;372:n71: 27 items, with their sub-items 42.
    rows = [row for row in coverage(view_of(1)) if row["standard"] == PRISMA]
    items = [row["item"] for row in rows if not row["item"].startswith("L")]
    assert len(items) == len(set(items)) == 42
    assert {int("".join(c for c in item if c.isdigit())) for item in items} == set(range(1, 28))


def test_the_additions_for_living_reviews_and_the_monitoring_inputs_are_listed(view_of):
    assert {"L1", "L2", "L3", "L4", *(f"M{i}" for i in range(1, 10))} <= set(states(view_of(1)))


def test_what_a_person_must_write_is_missing_until_somebody_has(view_of):
    for item in ("3", "23a"):
        assert states(view_of(3))[item] == "missing"


def test_a_store_without_records_leaves_their_items_missing(bare):
    found = states(bare)
    for item in ("6", "7", "8", "9", "11", "15", "16a", "16b", "17", "22", "26"):
        assert found[item] == "missing", item


def test_an_overdue_search_is_stale_and_named(view_of):
    row = next(r for r in coverage(view_of(3)) if r["item"] == "6")
    assert (row["state"], row["why"]) == ("stale", "overdue: register A")


def test_a_rating_on_older_numbers_makes_the_item_stale(view_of):
    assert states(view_of(3))["22"] == "stale"


def test_the_first_version_has_no_changes_to_results(view_of):
    assert states(view_of(1))["L3"] == "not applicable"
    assert states(view_of(3))["L3"] == "filled"


@pytest.mark.parametrize(("effect", "state"), [(0.80, "filled"), (0.75, "partly")])
def test_an_effect_to_detect_apart_from_the_smallest_that_matters_is_only_partly_told(view_of, effect, state):
    view = view_of(3)
    main = view.protocol.outcomes[0]
    planned = main.monitoring.model_copy(update={"effect": effect})
    outcome = main.model_copy(update={"monitoring": planned, "minimally_important": 0.80})
    protocol = view.protocol.model_copy(update={"outcomes": (outcome,)})
    only = replace(view, protocol=protocol, analyses={main.id: view.analyses[main.id]})
    assert states(only)["M2"] == state


def test_every_item_says_why_and_every_place_is_an_id_of_the_page(view_of):
    for row in coverage(view_of(3)):
        assert row["why"]
        assert row["fill"] in ("A", "H", "AH")


def test_conduct_expectations_are_listed_and_none_is_assumed(view_of):
    found = states(view_of(3))
    assert {"C39", "C46", "C48", "C66", "C70", "C72", "U8"} <= set(found)
    # One result in the main analysis stands on a waiver, and no second reading of characteristics is stored.
    assert (found["C46"], found["C45"], found["Rare"]) == ("partly", "missing", "filled")


def test_the_counts_add_up(view_of):
    rows = coverage(view_of(3))
    assert sum(counts(rows).values()) == len(rows)
    assert list(counts(rows)) == [str(state) for state in CoverageState]
