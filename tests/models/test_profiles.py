"""Profiles: geometry against the formulas of the schoolbook, and what is refused."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.models import Profile, Uniform, pin, rectangular

lengths = st.floats(1e-4, 10.0)


@given(length=lengths, diameter=lengths)
def test_a_pin_is_a_circle_along_its_length(length, diameter):
    profile = pin(length, diameter)
    x = np.linspace(0, length, 5)
    assert profile.area(x) == pytest.approx(np.full(5, math.pi * (diameter / 2) ** 2), rel=1e-14)
    assert profile.perimeter(x) == pytest.approx(np.full(5, 2 * math.pi * diameter / 2), rel=1e-14)
    assert profile.side_area() == pytest.approx(math.pi * diameter * length, rel=1e-14)


@given(length=lengths, width=lengths, thickness=lengths)
def test_guarded_edges_lose_no_heat_and_conduct_as_before(length, width, thickness):
    exposed = rectangular(length, width, thickness)
    guarded = rectangular(length, width, thickness, guarded_edges=True)
    assert exposed.section_area == guarded.section_area == pytest.approx(width * thickness)
    edges = 2 * thickness * length
    assert exposed.side_area() == pytest.approx(guarded.side_area() + edges, rel=1e-12)
    assert guarded.side_area() == pytest.approx(2 * width * length, rel=1e-12)


@given(side=lengths, length=lengths)
def test_width_and_thickness_are_alike_when_the_edges_are_exposed(side, length):
    assert rectangular(length, side, 2 * side) == rectangular(length, 2 * side, side)


def test_the_printed_side_area_of_a_fin():
    """Sukhatme, A Textbook on Heat Transfer, Example 2.14: 40.4 cm by 2 cm, edges counted."""
    assert rectangular(length=0.02, width=0.2, thickness=0.002).side_area() == pytest.approx(40.4e-2 * 2e-2)


def test_a_profile_is_uniform_and_one_value_a_position():
    profile = pin(0.1, 0.008)
    assert isinstance(profile, Profile)
    for n in (0, 1, 3):
        x = np.linspace(0, 0.1, n)
        assert profile.area(x).shape == profile.perimeter(x).shape == (n,)


def test_a_profile_is_frozen():
    profile = pin(0.1, 0.008)
    with pytest.raises(AttributeError):
        profile.length = 0.2


GIVEN = {
    Uniform: {"length": 0.1, "section_area": 5e-5, "section_perimeter": 0.025},
    pin: {"length": 0.1, "diameter": 0.008},
    rectangular: {"length": 0.1, "width": 0.03, "thickness": 0.002},
}


@pytest.mark.parametrize("value", [-1, -1e-300, 0.0, math.inf, -math.inf, math.nan])
@pytest.mark.parametrize(
    ("shape", "name"), [(shape, name) for shape, names in GIVEN.items() for name in names]
)
def test_a_length_that_is_none_is_refused_by_the_name_it_was_given_under(shape, name, value):
    with pytest.raises(ValueError) as refused:  # noqa: PT011 - the whole sentence is compared below
        shape(**GIVEN[shape] | {name: value})
    assert str(refused.value) == f"{name} must be positive and finite, got {value!r}"


def test_two_negative_sides_are_no_area():
    with pytest.raises(ValueError, match=r"^width must be positive and finite, got -0\.03$"):
        rectangular(0.1, -0.03, -0.002)
