"""Variances many orders of magnitude apart, against exact fractions and closed forms."""

from fractions import Fraction

import numpy as np
import pytest

from treering.pooling import leave_one_out, pool, pool_many
from treering.pooling.batch import single
from treering.pooling.likelihood import slope, slope_terms
from treering.pooling.moments import centre


def exact_sums(y, v, tau2=0):
    w = [1 / (Fraction(spread) + Fraction(tau2)) for spread in v]
    mean = sum(a * Fraction(b) for a, b in zip(w, y, strict=True)) / sum(w)
    return w, mean, sum(a * (Fraction(b) - mean) ** 2 for a, b in zip(w, y, strict=True))


def exact_dersimonian_laird(y, v):
    w, _, q = exact_sums(y, v)
    return float(max((q - (len(y) - 1)) / (sum(w) - sum(a * a for a in w) / sum(w)), 0))


def layers(*, first):
    """Trials whose variances lie up to 24 orders of magnitude apart, the one named first in front."""
    y = np.array([4e6, 3e-6, -1.2, 5.0, 1e-6])
    v = np.array([1e12, 1e-12, 1.0, 2.0, 3e-12])
    order = np.roll(np.arange(5), -first)
    return y[order], v[order]


@pytest.mark.parametrize("first", range(5))
def test_q_and_the_moment_estimate_keep_their_digits_whichever_trial_comes_first(first):
    y, v = layers(first=first)
    found = pool(y, v, tau2="dersimonian-laird", interval="wald")
    assert found.q == pytest.approx(float(exact_sums(y, v)[2]), rel=1e-12)
    assert found.tau2 == pytest.approx(exact_dersimonian_laird(y, v), rel=1e-11)


@pytest.mark.parametrize("first", range(5))
def test_a_very_imprecise_trial_does_not_take_digits_from_the_mean_of_precise_ones(first):
    y, v = layers(first=first)
    found = pool(y, v, model="common")
    exact = exact_sums(y, v)[1]
    assert abs(Fraction(found.estimate) - exact) < 1e-9 * found.standard_error


@pytest.mark.parametrize("method", ["dersimonian-laird", "paule-mandel", "reml"])
@pytest.mark.parametrize("flip", [False, True])
def test_two_trials_have_their_closed_tau2_however_far_apart_their_variances(method, flip):
    # For two trials Q(t) = d^2 / (v1 + v2 + 2 t), so all three give (d^2 - v1 - v2) / 2; REML has one maximum
    y, v = np.array([0.5, 400.0]), np.array([1e-12, 2e4])
    order = [1, 0] if flip else [0, 1]
    found = pool(y[order], v[order], tau2=method)
    assert found.tau2 == pytest.approx((399.5**2 - 2e4 - 1e-12) / 2, rel=1e-12)
    assert pool(y[order] / 1e3, v[order], tau2=method).tau2 == 0.0


@pytest.mark.parametrize("tau2", [0.0, 1e-9, 0.5])
def test_terms_of_the_restricted_slope_match_exact_arithmetic(tau2):
    y, v = layers(first=3)
    batch, _ = centre(single(y, v))
    w, mean, _ = exact_sums(y, v, tau2)
    total, square, cube = (sum(a**power for a in w) for power in (1, 2, 3))
    d = [Fraction(a) - mean for a in y]
    a, shift, third = (
        sum(x**p * e**r for x, e in zip(w, d, strict=True)) for p, r in ((2, 2), (2, 1), (3, 2))
    )
    exact = {
        "a": a,
        "b": total - square / total,
        "fall_a": 2 * (third - shift * shift / total),
        "fall_b": square - 2 * cube / total + (square / total) ** 2,
    }
    found = slope(batch, np.array([tau2]), restricted=True)
    for name, value in exact.items():
        assert getattr(found, name)[0] == pytest.approx(float(value), rel=1e-9), name
    again = slope_terms(batch, np.array([tau2]), restricted=True)
    assert [float(term[0]) for term in again] == pytest.approx([found.a[0], found.b[0]], rel=1e-12)


def test_bulk_and_leave_one_out_put_the_precise_trial_first_where_it_is():
    y, v = layers(first=0)
    plain = np.array([0.1, 0.4, 0.2])
    many = pool_many(
        np.concatenate([plain, y]), np.concatenate([plain, v]), np.repeat([0, 1], [3, 5]), tau2="reml"
    )
    alone = pool(y, v)
    assert many["tau2"].tolist() == pytest.approx([pool(plain, plain).tau2, alone.tau2], rel=1e-9)
    np.testing.assert_allclose(many["weights"][1], alone.weights, rtol=1e-9)
    without = leave_one_out(y, v, tau2="dersimonian-laird")["tau2"].to_numpy()
    rest = [exact_dersimonian_laird(np.delete(y, at), np.delete(v, at)) for at in range(5)]
    np.testing.assert_allclose(without, rest, rtol=1e-11)
