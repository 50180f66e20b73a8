"""The transverse Biot number and its limit, and ranges as code. What lies beyond is in models/README.md."""

import numpy as np
import pytest

from finback.models import is_one_dimensional, pin, rectangular, transverse_biot
from finback.models.validity import TRANSVERSE_BIOT_LIMIT, Flag, Range


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


# --- ranges ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("limits", "inside", "outside", "sentence"),
    [
        (Range("x", 1.0, 2.0), [1.0, 1.5, 2.0], 2.5, "from 1 to 2; here it is 2.5."),
        (Range("x", 1.0, 2.0, "mm"), [1.0], 0.5, "from 1 to 2 mm; here it is 0.5 mm."),
        (Range("x", 0.0, 1e9, open_low=True), [1e-300, 1e9], 0.0, "above 0 and up to 1e9; here it is 0."),
        (Range("x", 5e5, 1e8, open_low=True), [1e8], 5e5, "above 500000 and up to 1e8; here it is 500000."),
        (Range("x", 1.0, 2.0, open_high=True), [1.0], 2.0, "from 1 and below 2; here it is 2."),
        (Range("x", high=2300.0), [-np.inf, 2300.0], 1e4, "up to 2300; here it is 10000."),
        (Range("x", high=2300.0, open_high=True), [2299.0], 2300.0, "below 2300; here it is 2300."),
        (Range("x", low=0.2), [0.2, np.inf], 0.1, "from 0.2 up; here it is 0.1."),
        (Range("x", low=0.2, open_low=True), [0.3], 0.2, "above 0.2; here it is 0.2."),
        (Range("x", 1e-10, 1.0), [1e-10], 1e-11, "from 1e-10 to 1; here it is 1e-11."),
        (Range("x", 1.0, 2.0), [1.0], np.nan, "from 1 to 2; here it is nan."),
    ],
)
def test_a_range_and_its_sentence(limits, inside, outside, sentence):
    assert limits.holds(np.array(inside)).all()
    assert limits.check(np.array(inside), "The law") == ()
    assert not limits.holds(outside)
    assert limits.check(outside, "The law") == (Flag("x", f"The law is stated for x {sentence}"),)


def test_a_block_has_one_flag_for_all_that_lie_outside():
    (flag,) = Range("x", 1.0, 2.0).check(np.array([0.5, 1.5, 3.0, 0.25]), "The law")
    assert str(flag) == "The law is stated for x from 1 to 2; here it is 0.25 to 3 (3 of 4 values)."
