"""Bounds for Z: the published tables, the definition, and the next bound after looks as they happened."""

import math

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st
from scipy import integrate, stats

from treering.errors import AnalysisError
from treering.monitoring import (
    alpha_spent,
    boundaries,
    boundaries_for_alpha,
    crossing_probabilities,
    next_boundary,
)
from treering.terms import Spending


def correlation(fractions):
    t = np.asarray(fractions)
    return np.sqrt(np.minimum.outer(t, t) / np.maximum.outer(t, t))


def crossed_by_multivariate_normal(fractions, z, points=200_000):
    inside = stats.multivariate_normal.cdf(
        z,
        np.zeros(len(z)),
        correlation(fractions),
        lower_limit=-np.asarray(z),
        maxpts=points,
        abseps=1e-10,
        releps=1e-10,
        rng=np.random.default_rng(20310101),
    )
    return 1.0 - inside


@pytest.mark.parametrize("case", ["SQ01", "SQ03", "SQ04", "SQ06"])
def test_printed_bounds_of_the_obrien_fleming_type_function(published, agrees, case):
    plan = published[case]
    found = boundaries(plan["data"]["t"], alpha=0.05, sides=plan["params"]["sides"])
    agrees(plan, {f"z[{look}]": z for look, z in enumerate(found.z)})


@pytest.mark.parametrize("case", ["SQ08", "SQ10", "SQ12"])
def test_nominal_p_values_quoted_in_trial_protocols(published, agrees, case):
    found = boundaries(published[case]["data"]["t"])
    agrees(published[case], {f"nominal[{look}]": p for look, p in enumerate(found.nominal_p)})


def test_only_the_function_applied_to_each_tail_gives_the_printed_table(published, agrees):
    t = published["SQ23"]["data"]["t"]
    whole = boundaries_for_alpha(t, alpha_spent(t, alpha=0.05, sides=1), sides=2)
    agrees(published["SQ23"], {"per_tail.z[0]": boundaries(t).z[0], "whole.z[0]": whole.z[0]})


def test_both_conventions_at_the_quarters_are_the_calculated_rows():
    # Calculated for the project, 3 decimals: per side 4.333 2.963 2.359 2.014; whole 3.920 2.774 2.298 2.043.
    t = [0.25, 0.5, 0.75, 1.0]
    whole = boundaries_for_alpha(t, alpha_spent(t, alpha=0.05, sides=1), sides=2)
    assert boundaries(t).z == pytest.approx([4.333, 2.963, 2.359, 2.014], abs=6e-4)
    assert whole.z == pytest.approx([3.920, 2.774, 2.298, 2.043], abs=6e-4)


def test_printed_bounds_of_the_pocock_type_function():
    # Five equal looks, two-sided 0.05: 2.438 2.427 2.410 2.397 2.386 (Reboussin, DeMets, Kim and Lan 2000,
    # Control Clin Trials 21:190; from memory).
    found = boundaries([0.2, 0.4, 0.6, 0.8, 1.0], spending="pocock")
    assert found.z == pytest.approx([2.438, 2.427, 2.410, 2.397, 2.386], abs=6e-4)


def test_unequal_looks_cross_as_often_as_alpha_is_spent_by_the_multivariate_normal(published, agrees):
    t = np.array(published["SQ15"]["data"]["t"])
    z = boundaries(t).z
    found = {f"cum[{k}]": crossed_by_multivariate_normal(t[: k + 1], z[: k + 1]) for k in range(1, t.size)}
    agrees(published["SQ15"], {"cum[0]": 2.0 * stats.norm.sf(z[0]), **found})


def test_looks_past_the_required_information_spend_alpha_once(published, agrees):
    found = boundaries(published["SQ25"]["data"]["t"])
    error = crossed_by_multivariate_normal([0.5, 1.1], found.z[:2])
    agrees(
        published["SQ25"],
        {
            "cum[1]": found.alpha_spent[1],
            "cum[2]": found.alpha_spent[2],
            "third_is_infinite": float(math.isinf(found.z[2])),
            "error_mvn": error,
        },
    )
    assert found.nominal_p[2] == 0.0


def test_two_looks_are_exact_to_1e_6_in_z_by_adaptive_quadrature():
    # The second bound solves P(|Z1| < z1, |Z2| > z2) = step; scipy's adaptive quadrature gives that chance.
    t = np.array([0.37, 0.81])
    found = boundaries(t)
    step = found.alpha_spent[1] - found.alpha_spent[0]
    sigma = math.sqrt(t[1] - t[0])

    def left(z):
        def inner(s):
            out = stats.norm.sf((z * math.sqrt(t[1]) - s) / sigma)
            out += stats.norm.cdf((-z * math.sqrt(t[1]) - s) / sigma)
            return stats.norm.pdf(s, scale=math.sqrt(t[0])) * out

        edge = found.z[0] * math.sqrt(t[0])
        return integrate.quad(inner, -edge, edge, epsabs=1e-14, epsrel=1e-12)[0]

    assert left(found.z[1] - 1e-6) > step > left(found.z[1] + 1e-6)


@pytest.mark.parametrize("gap", [1e-3, 1e-5, 1e-8, 1e-11])
def test_a_look_that_brings_almost_nothing_still_spends_its_share(gap):
    # Reference: adaptive quadrature of the second exit near the first bound, over 12 sd of the small step.
    t = np.array([0.5, 0.5 + gap])
    found = boundaries_for_alpha(t, [0.01, 0.01 + 1e-4 * gap])
    sigma, edge = math.sqrt(gap), found.z[0] * math.sqrt(0.5)

    def inner(u):
        s = edge - u * sigma
        reach = (found.z[1] * math.sqrt(t[1]) - s) / sigma
        return 2.0 * sigma * stats.norm.pdf(s, scale=math.sqrt(0.5)) * stats.norm.sf(reach)

    spent = integrate.quad(inner, 0.0, 12.0, epsabs=0.0, epsrel=1e-10)[0]
    # dP/dz is about -z P times the steepness of the narrow step, so 1e-3 in P is far below 1e-6 in Z here.
    assert spent == pytest.approx(1e-4 * gap, rel=1e-3 if gap < 1e-9 else 1e-6)


@pytest.mark.parametrize("allowed", [1e-9, 1e-30, 1e-200])
def test_a_very_small_alpha_keeps_its_digits(allowed):
    found = boundaries_for_alpha([0.1, 0.2], [allowed, 2 * allowed], sides=1)
    assert found.z[0] == pytest.approx(stats.norm.isf(allowed), rel=1e-12)
    again = crossing_probabilities([0.1, 0.2], found.z).upper
    assert again == pytest.approx([allowed, allowed], rel=1e-9)


def test_a_look_with_nothing_to_spend_has_an_infinite_bound_and_changes_no_other():
    found = boundaries_for_alpha([0.3, 0.6, 1.0], [0.01, 0.01, 0.05])
    assert math.isinf(found.z[1])
    assert found.z[[0, 2]] == pytest.approx(boundaries_for_alpha([0.3, 1.0], [0.01, 0.05]).z, abs=1e-10)


def test_looks_too_early_to_spend_anything_have_no_bound():
    found = boundaries([1e-6, 2e-6])
    assert np.all(np.isinf(found.z))
    assert crossing_probabilities(found.fractions, found.z, lower=-found.z).total == 0.0


PLANS = {
    "spending": st.sampled_from(list(Spending)),
    "sides": st.sampled_from([1, 2]),
    "alpha": st.floats(0.001, 0.4),
    "fractions": st.lists(st.floats(0.02, 1.5), min_size=1, max_size=8, unique=True).map(sorted),
}


@settings(max_examples=60, deadline=None)
@given(**PLANS)
@example(spending="obrien-fleming", sides=2, alpha=0.05, fractions=[0.5, 0.5 + 1e-7, 0.5 + 1e-4, 1.0])
def test_the_chance_to_cross_under_no_effect_is_the_alpha_spent_at_every_look(
    spending, sides, alpha, fractions
):
    found = boundaries(fractions, alpha=alpha, sides=sides, spending=spending)
    crossing = crossing_probabilities(fractions, found.z, lower=-found.z if sides == 2 else None)
    assert np.cumsum(crossing.upper + crossing.lower) == pytest.approx(found.alpha_spent, abs=1e-9)


@settings(max_examples=30, deadline=None)
@given(**PLANS)
def test_a_larger_alpha_lowers_every_bound(spending, sides, alpha, fractions):
    assume(alpha < 0.3)
    strict = boundaries(fractions[:1], alpha=alpha, sides=sides, spending=spending).z
    loose = boundaries(fractions[:1], alpha=alpha * 1.2, sides=sides, spending=spending).z
    assert np.all((loose < strict) | np.isinf(strict))


@settings(max_examples=30, deadline=None)
@given(**PLANS, scale=st.floats(0.01, 1000.0))
def test_taking_the_looks_one_by_one_as_they_were_used_gives_the_same_bounds(
    spending, sides, alpha, fractions, scale
):
    whole = boundaries(fractions, alpha=alpha, sides=sides, spending=spending)
    used = []
    for look, allowed in enumerate(whole.alpha_spent):
        info = np.array(fractions[: look + 1]) * scale
        found = next_boundary(info, used, cumulative_alpha=allowed, sides=sides)
        crossing = next_boundary(info, used, cumulative_alpha=allowed, sides=sides).alpha_spent
        assert crossing == pytest.approx(allowed, abs=1e-9)
        used.append(found.z)
    both = np.isfinite(whole.z) & (np.diff(whole.alpha_spent, prepend=0.0) > 1e-9)
    assert np.array(used)[both] == pytest.approx(whole.z[both], abs=1e-6)


def test_the_next_bound_respects_an_earlier_bound_that_was_higher_than_planned():
    # A look that used 3.5 in place of 2.963 spent less, so the next one may use more of the same allowance.
    plan = boundaries([0.5, 1.0])
    found = next_boundary([0.5, 1.0], [3.5], cumulative_alpha=0.05)
    assert found.alpha_before == pytest.approx(2.0 * stats.norm.sf(3.5), rel=1e-12)
    assert found.z < plan.z[1]
    assert crossed_by_multivariate_normal([0.5, 1.0], [3.5, found.z]) == pytest.approx(0.05, abs=1e-9)


def test_an_increment_of_1e_9_gives_the_exact_bound():
    # P(|Z1| < 2, Z2 > z) by scipy's adaptive quadrature, relative error 1e-10.
    found = next_boundary([40.0, 60.0], [2.0], alpha_increment=1e-9)
    sigma = math.sqrt(20.0)

    def inner(s):
        reach = (found.z * math.sqrt(60.0) - s) / sigma
        return 2.0 * stats.norm.pdf(s, scale=math.sqrt(40.0)) * stats.norm.sf(reach)

    edge = 2.0 * math.sqrt(40.0)
    spent = integrate.quad(inner, -edge, edge, epsabs=0.0, epsrel=1e-11, limit=200)[0]
    assert spent == pytest.approx(1e-9, rel=1e-8)


def test_when_earlier_looks_spent_all_that_is_allowed_there_is_no_bound():
    found = next_boundary([0.77, 0.8], [2.0], cumulative_alpha=0.0217)
    assert math.isinf(found.z)
    assert found.alpha_spent == found.alpha_before == pytest.approx(2.0 * stats.norm.sf(2.0))


def test_shrinking_information_redraws_the_bound_of_the_calculated_example():
    # Calculated for the project: 1000, 2000, 3000 of 3877 people, last bound 2.32; with D2 0.5 the required
    # size doubles, 3300 people are 0.43 of it and the redrawn bound is 3.29; spending there is 0.0012 while
    # 0.0217 is gone.
    required = 3877.2391
    planned = boundaries(np.array([1000, 2000, 3000]) / required)
    redrawn = boundaries(np.array([1000, 2000, 3000, 3300]) / (2 * required))
    assert planned.fractions == pytest.approx([0.26, 0.52, 0.77], abs=0.005)
    assert planned.z[-1] == pytest.approx(2.32, abs=0.006)
    assert planned.alpha_spent[-1] == pytest.approx(0.0217, abs=6e-5)
    assert redrawn.alpha_spent[-1] == pytest.approx(0.0012, abs=6e-5)
    assert redrawn.fractions[-1] == pytest.approx(0.43, abs=0.005)
    assert redrawn.z[-1] == pytest.approx(3.29, abs=0.006)


@pytest.mark.slow
def test_ten_million_simulated_paths_cross_as_often_as_alpha_is_spent():
    # Seeded; the tolerance is four Monte Carlo standard errors of the total (0.00007 each).
    t = np.array([0.13, 0.31, 0.34, 0.72, 1.0])
    z = boundaries(t).z
    rng, runs, blocks = np.random.default_rng(20310102), 10_000_000, 20
    crossed = np.zeros(t.size)
    for _ in range(blocks):
        steps = rng.standard_normal((runs // blocks, t.size)) * np.sqrt(np.diff(t, prepend=0.0))
        out = np.abs(np.cumsum(steps, axis=1) / np.sqrt(t)) >= z
        crossed += np.maximum.accumulate(out, axis=1).sum(axis=0)
    assert crossed / runs == pytest.approx(alpha_spent(t), abs=2.8e-4)


@pytest.mark.parametrize("fractions", [[], [0.5, 0.5], [0.5, 0.4], [0.0, 0.5], [0.5, float("nan")], [[0.5]]])
def test_fractions_that_do_not_increase_are_refused(fractions):
    with pytest.raises(AnalysisError, match="do not increase") as refusal:
        boundaries(fractions)
    assert refusal.value.found is not None
    assert refusal.value.next_step


@pytest.mark.parametrize("spent", [[0.02, 0.01], [0.01], [-0.01, 0.05], [0.01, 0.5]])
def test_alpha_that_falls_or_does_not_fit_is_refused(spent):
    with pytest.raises(AnalysisError, match="cumulative alpha"):
        boundaries_for_alpha([0.5, 1.0], spent)


@pytest.mark.parametrize(
    "wrong",
    [
        {"used_bounds": []},
        {"used_bounds": [float("nan")]},
        {"used_bounds": [-math.inf]},
        {"cumulative_alpha": None},
        {"alpha_increment": 0.01},
        {"cumulative_alpha": -0.01},
        {"cumulative_alpha": 0.6},
        {"informations": [2.0, 1.0]},
        {"sides": 0},
    ],
)
def test_a_ledger_that_does_not_fit_is_refused(wrong):
    fit = {"informations": [1.0, 2.0], "used_bounds": [3.0], "cumulative_alpha": 0.05}
    with pytest.raises(AnalysisError):
        next_boundary(**{**fit, **wrong})
