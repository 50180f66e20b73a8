"""The transverse Biot number, and its limit. What lies beyond is in models/README.md and its test."""

import numpy as np
import pytest

from finback.models import is_one_dimensional, pin, rectangular, transverse_biot
from finback.models.validity import TRANSVERSE_BIOT_LIMIT


def test_a_pin_counts_a_quarter_of_its_diameter():
    profile = pin(0.1, 0.008)
    biot = transverse_biot(50.0, profile.section_area, profile.section_perimeter, 160.0)
    assert biot == pytest.approx(50.0 * 0.008 / 4 / 160.0, rel=1e-14)


def test_a_wide_plate_counts_half_its_thickness():
    profile = rectangular(0.1, width=1.0, thickness=0.002, guarded_edges=True)
    biot = transverse_biot(50.0, profile.section_area, profile.section_perimeter, 160.0)
    assert biot == pytest.approx(50.0 * 0.001 / 160.0, rel=1e-14)


def test_a_thick_pin_is_flagged():
    """Sachdeva, Fundamentals of Engineering Heat and Mass Transfer, Example 3.34 (p. 117).

    The book takes it for a fin; h D/(4 k) is 5000 · 0.01/(4 · 16) = 0.78.
    """
    profile = pin(0.1, 0.01)
    biot = transverse_biot(5000.0, profile.section_area, profile.section_perimeter, 16.0)
    assert biot == pytest.approx(0.78125, rel=1e-12)
    assert not is_one_dimensional(biot)


def test_the_limit_itself_is_inside():
    assert TRANSVERSE_BIOT_LIMIT == 0.1
    assert is_one_dimensional(0.1)
    assert not is_one_dimensional(np.nextafter(0.1, 1.0))


def test_one_thick_set_is_enough():
    biot = transverse_biot(np.array([10.0, 5000.0]), 5e-5, 0.025, np.array([16.0, 16.0]))
    assert biot.shape == (2,)
    assert not is_one_dimensional(biot)
    assert is_one_dimensional(biot[:1])


def test_what_is_not_a_number_is_not_one_dimensional():
    assert not is_one_dimensional(float("nan"))
