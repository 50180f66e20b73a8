"""Cubics through evenly spaced values against scipy's spline and exact parabolas."""

import numpy as np
from scipy.interpolate import CubicHermiteSpline, CubicSpline

from finback import cubics

STEP = 0.25
X = 1.0 + STEP * np.arange(9)


def test_slopes_are_a_splines() -> None:
    y = np.column_stack([np.sin(X), np.exp(-X)])
    found = cubics.slopes(y, STEP)
    ends = [(1, found[0]), (1, found[-1])]
    np.testing.assert_allclose(found, CubicSpline(X, y, bc_type=tuple(ends))(X, 1), rtol=1e-12)
    np.testing.assert_allclose(found, np.column_stack([np.cos(X), -np.exp(-X)]), atol=0.02)


def test_parabolas_are_exact() -> None:
    y = 3 * np.square(X) - 2 * X
    np.testing.assert_allclose(cubics.slopes(y, STEP), 6 * X - 2, rtol=1e-12)
    fine, slopes = cubics.refine(y, 6 * X - 2, STEP, 5)
    x = 1.0 + STEP / 5 * np.arange(41)
    np.testing.assert_allclose(fine, 3 * np.square(x) - 2 * x, rtol=1e-12)
    np.testing.assert_allclose(slopes, 6 * x - 2, rtol=1e-12)


def test_points_between_are_hermites() -> None:
    y, slopes = np.column_stack([np.sin(X), np.cos(X)]), np.column_stack([X, -X])
    curve = CubicHermiteSpline(X, y, slopes)
    fine, change = cubics.refine(y, slopes, STEP, 3)
    x = 1.0 + STEP / 3 * np.arange(25)
    np.testing.assert_allclose(fine, curve(x), rtol=1e-12)
    np.testing.assert_allclose(change, curve(x, 1), rtol=1e-9, atol=1e-12)


def test_two_places_make_a_line_and_one_a_point() -> None:
    np.testing.assert_allclose(cubics.slopes(np.array([1.0, 3.0]), 0.5), 4.0)
    np.testing.assert_array_equal(cubics.slopes(np.array([[1.0, 2.0]]), 0.5), np.zeros((1, 2)))
    fine, _ = cubics.refine(np.array([1.0, 3.0]), np.array([4.0, 4.0]), 0.5, 4)
    np.testing.assert_allclose(fine, [1.0, 1.5, 2.0, 2.5, 3.0])
