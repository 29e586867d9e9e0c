"""Closed forms of the tails of t and chi-square against mpmath at 40 digits, and against SciPy.

The handbook is Abramowitz and Stegun (1964), its equation numbers from memory.
"""

import mpmath
import numpy as np
import pytest
from scipy import special

from treering.pooling.tails import MANY, chi2_tail, t_tail


def exact_t(df, t):
    """Upper tail of t: half the regularised incomplete beta function (26.5.27 of the handbook)."""
    df, t = mpmath.mpf(df), mpmath.mpf(t)
    return mpmath.betainc(df / 2, mpmath.mpf(1) / 2, 0, df / (df + t * t), regularized=True) / 2


def exact_chi2(df, q):
    """Upper tail of chi-square: the regularised upper incomplete gamma function (26.4.19 there)."""
    return mpmath.gammainc(mpmath.mpf(df) / 2, mpmath.mpf(q) / 2, regularized=True)


def shared(function, df, places):
    """Tail at these places, asked for so often that the closed form pays."""
    often = np.resize(places, max(MANY, places.size))
    return function(np.full(often.size, float(df)), often)[: places.size]


@pytest.mark.parametrize("df", [1, 2, 3, 4, 5, 8, 19, 20, 59, 60])
def test_shared_t_tails_equal_the_incomplete_beta_function(df):
    places = np.concatenate([[0.0, 1e-9], np.linspace(0.01, 12.0, 40), [-2.5, 40.0]])
    with mpmath.workdps(40):
        for found, t in zip(shared(t_tail, df, places), places, strict=True):
            assert found == pytest.approx(float(exact_t(df, t)), rel=1e-11)


@pytest.mark.parametrize("df", [1, 2, 3, 4, 5, 8, 19, 20, 59, 60])
def test_shared_chi_square_tails_equal_the_incomplete_gamma_function(df):
    places = np.concatenate([[0.0, 1e-9], np.geomspace(0.01, 1290.0, 40)])
    with mpmath.workdps(40):
        for found, q in zip(shared(chi2_tail, df, places), places, strict=True):
            assert found == pytest.approx(float(exact_chi2(df, q)), rel=2e-12)


def test_few_or_many_or_uneven_degrees_of_freedom_are_left_to_scipy():
    t, q = np.linspace(-4.0, 4.0, 50), np.linspace(0.1, 60.0, 50)
    for df in (np.full(50, 7.0), np.linspace(1.0, 9.0, 50)):
        assert np.array_equal(t_tail(df, t), special.stdtr(df, -np.abs(t)))
        assert np.array_equal(chi2_tail(df, q), special.chdtrc(df, q))
    long = np.full(MANY, 61.0)
    assert np.array_equal(chi2_tail(long, np.resize(q, MANY)), special.chdtrc(long, np.resize(q, MANY)))


def test_a_shared_tail_is_the_same_number_among_others():
    df = np.concatenate([np.full(MANY, 6.0), np.arange(1.0, 40.0), np.full(MANY, 11.0)])
    rng = np.random.default_rng(4)
    t, q = rng.normal(0.0, 3.0, df.size), rng.chisquare(df)
    assert t_tail(df, t) == pytest.approx(special.stdtr(df, -np.abs(t)), rel=1e-11)
    assert chi2_tail(df, q) == pytest.approx(special.chdtrc(df, q), rel=2e-12)


def test_beyond_double_precision_chi_square_falls_to_zero_and_an_unknown_t_stays_unknown():
    assert chi2_tail(np.full(MANY, 5.0), np.full(MANY, 1e9)).max() == 0.0
    assert np.isnan(t_tail(np.full(MANY, 5.0), np.full(MANY, np.nan))).all()
