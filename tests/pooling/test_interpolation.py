"""Inverse interpolation against polynomials that it must reproduce and roots from SciPy."""

import numpy as np
import pytest
from scipy.optimize import brentq

from treering.pooling.interpolation import Course


def cubic(r):
    return 2.0 + 3.0 * r - 0.5 * r**2 + 0.25 * r**3


def cubic_rate(r):
    return 3.0 - r + 0.75 * r**2


def test_value_and_slope_at_two_places_give_back_a_cubic():
    left, right = np.array([-1.0, -0.3]), np.array([0.5, 2.0])
    course = Course.touching(left, cubic(left), cubic_rate(left))
    course.touch(right, cubic(right), cubic_rate(right))
    assert course.root() == pytest.approx([2.0, 2.0], rel=1e-14)
    assert course.at(np.array([0.7, 0.7]))[0] == pytest.approx(cubic(0.7), rel=1e-14)


def test_more_points_give_back_a_polynomial_of_higher_degree():
    quintic = np.polynomial.Polynomial([1.0, 2.0, -0.3, 0.4, 0.1, -0.05])
    start = np.array([-1.0])
    course = Course.touching(start, quintic(start), quintic.deriv()(start))
    for r in (-0.5, 0.4, 1.0, 1.5):
        course.lead_through(np.array([r]), quintic(np.array([r])))
    assert course.root()[0] == pytest.approx(1.0, rel=1e-13)


def test_a_point_that_is_known_already_changes_nothing():
    start = np.array([-1.0])
    course = Course.touching(start, np.array([0.0]), np.array([2.0]))
    course.lead_through(start, np.array([0.0]))
    assert course.root()[0] == 2.0


def test_three_more_places_bring_a_smooth_root_to_twelve_digits():
    def r(t):
        return np.log1p(t) + 0.1 * t - 1.0

    t = np.array([1.0])
    course = Course.touching(r(t), t, 1.0 / (1.0 / (1.0 + t) + 0.1))
    for _ in range(4):
        t = course.root()
        course.lead_through(r(t), t)
    assert course.root()[0] == pytest.approx(brentq(r, 0.0, 5.0, xtol=1e-15), rel=1e-12)
