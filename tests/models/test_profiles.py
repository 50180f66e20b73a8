"""Profiles: geometry against the formulas of the schoolbook, and what is refused."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from finback.models import (
    Annular,
    ConcaveParabolic,
    ConcavePin,
    Cone,
    ConvexParabolic,
    ConvexPin,
    HyperbolicAnnular,
    Profile,
    Table,
    Trapezoidal,
    Triangular,
    Uniform,
    pin,
    rectangular,
)

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


STRAIGHT = {"length": 0.1, "width": 0.03, "thickness": 0.002}
ROUND = {"length": 0.1, "diameter": 0.008}
RING = {"inner_diameter": 0.025, "outer_diameter": 0.055, "thickness": 0.001}
GIVEN = {
    Uniform: {"length": 0.1, "section_area": 5e-5, "section_perimeter": 0.025},
    pin: ROUND,
    rectangular: STRAIGHT,
    Trapezoidal: STRAIGHT | {"tip_thickness": 0.001},
    Triangular: STRAIGHT,
    ConcaveParabolic: STRAIGHT,
    ConvexParabolic: STRAIGHT,
    Cone: ROUND | {"tip_diameter": 0.002},
    ConcavePin: ROUND,
    ConvexPin: ROUND,
    Annular: RING,
    HyperbolicAnnular: RING,
}
MAY_BE_ZERO = {"tip_thickness", "tip_diameter"}


@pytest.mark.parametrize("value", [-1, -1e-300, 0.0, math.inf, -math.inf, math.nan])
@pytest.mark.parametrize(
    ("shape", "name"),
    [(shape, name) for shape, names in GIVEN.items() for name in names if name not in MAY_BE_ZERO],
)
def test_a_length_that_is_none_is_refused_by_the_name_it_was_given_under(shape, name, value):
    with pytest.raises(ValueError) as refused:  # noqa: PT011 - the whole sentence is compared below
        shape(**GIVEN[shape] | {name: value})
    assert str(refused.value) == f"{name} must be positive and finite, got {value!r}"


def test_two_negative_sides_are_no_area():
    with pytest.raises(ValueError, match=r"^width must be positive and finite, got -0\.03$"):
        rectangular(0.1, -0.03, -0.002)


@pytest.mark.parametrize("value", [-1, -1e-300, math.inf, -math.inf, math.nan])
@pytest.mark.parametrize(("shape", "name"), [(Trapezoidal, "tip_thickness"), (Cone, "tip_diameter")])
def test_a_tip_that_is_less_than_nothing_is_refused(shape, name, value):
    with pytest.raises(ValueError) as refused:  # noqa: PT011 - the whole sentence is compared below
        shape(**GIVEN[shape] | {name: value})
    assert str(refused.value) == f"{name} must be finite and not negative, got {value!r}"


@pytest.mark.parametrize("shape", [Annular, HyperbolicAnnular])
@pytest.mark.parametrize("outer", [0.025, 0.02])
def test_a_ring_is_larger_outside_than_inside(shape, outer):
    with pytest.raises(
        ValueError, match=rf"^outer_diameter must be .* inner_diameter, got {outer} and 0.025$"
    ):
        shape(**RING | {"outer_diameter": outer})


# --- tapered and annular shapes ---------------------------------------------------------------------

L, W, T, D = 0.03, 0.1, 0.004, 0.006
AT_HALF = {  # thickness or diameter half-way over that at the base: 1/2, 1/4 and the root of 1/2
    Trapezoidal(L, W, T, 0.001): (0.0025 / T, 0.001 / T),
    Trapezoidal(L, W, T, 0.006): (0.005 / T, 0.006 / T),
    Triangular(L, W, T): (0.5, 0),
    ConcaveParabolic(L, W, T): (0.25, 0),
    ConvexParabolic(L, W, T): (math.sqrt(0.5), 0),
    Cone(L, D): (0.5, 0),
    Cone(L, D, 0.002): (0.004 / D, 0.002 / D),
    ConcavePin(L, D): (0.25, 0),
    ConvexPin(L, D): (math.sqrt(0.5), 0),
}
by_shape = pytest.mark.parametrize(
    ("profile", "shares"), AT_HALF.items(), ids=[type(profile).__name__ for profile in AT_HALF]
)


@by_shape
def test_sections_at_base_half_way_and_tip(profile, shares):
    """Shapes by Gardner, Trans. ASME 67 (1945) 621: powers 1, 2 and 1/2 of the distance from the tip."""
    t = np.array([1.0, *shares])
    x = np.array([0, L / 2, L])
    if hasattr(profile, "diameter"):
        assert profile.area(x) == pytest.approx(np.pi / 4 * (t * D) ** 2, rel=1e-14)
        assert profile.perimeter(x) == pytest.approx(np.pi * t * D, rel=1e-14)
    else:
        assert profile.area(x) == pytest.approx(W * t * T, rel=1e-14)
        assert profile.perimeter(x) == pytest.approx(2 * W + 2 * t * T, rel=1e-14)


def test_guarded_edges_of_a_tapered_fin_leave_its_two_faces():
    fin = ConcaveParabolic(L, W, T, guarded_edges=True)
    assert fin.perimeter(np.linspace(0, L, 4)) == pytest.approx(np.full(4, 2 * W))
    assert fin.side_area() == pytest.approx(2 * W * L)
    assert ConcaveParabolic(L, W, T).side_area() - fin.side_area() == pytest.approx(2 * T * L / 3)


def test_sections_of_a_ring():
    """A = 2 pi r t and P = 4 pi r: Gardner, Trans. ASME 67 (1945) 621; hyperbolic: t r = t_b r1."""
    x, r = np.array([0, 0.005, 0.015]), np.array([0.0125, 0.0175, 0.0275])
    plain, hyperbolic = Annular(**RING), HyperbolicAnnular(**RING)
    assert plain.length == hyperbolic.length == pytest.approx(0.015)
    assert plain.area(x) == pytest.approx(2 * np.pi * r * 0.001)
    assert hyperbolic.area(x) == pytest.approx(2 * np.pi * r * (0.001 * 0.0125 / r))
    assert plain.perimeter(x) == pytest.approx(4 * np.pi * r)
    assert hyperbolic.perimeter(x) == pytest.approx(4 * np.pi * r)
    assert plain.side_area() == hyperbolic.side_area() == pytest.approx(2 * np.pi * (0.0275**2 - 0.0125**2))


SLANT = [
    Trapezoidal(L, W, T, 0.001, slant_surface=True),
    Triangular(L, W, T, slant_surface=True),
    ConcaveParabolic(L, W, T, slant_surface=True),
    ConvexParabolic(L, W, T, slant_surface=True, guarded_edges=True),
    ConvexParabolic(L, W, 1e-5, slant_surface=True),
    Cone(L, D, slant_surface=True),
    Cone(L, D, 0.01, slant_surface=True),
    ConcavePin(L, D, slant_surface=True),
    ConvexPin(L, D, slant_surface=True),
    HyperbolicAnnular(**RING, slant_surface=True),
    HyperbolicAnnular(0.01, 0.3, 0.02, slant_surface=True),
]


@pytest.mark.parametrize("profile", [*AT_HALF, *SLANT, Annular(**RING), HyperbolicAnnular(**RING)], ids=repr)
def test_the_side_is_the_perimeter_all_along(profile):
    def of_root(u):  # x = L (1 - u²): a perimeter that grows beyond bounds at the tip stays smooth
        return 2 * u * profile.length * float(profile.perimeter(np.array([profile.length * (1 - u**2)]))[0])

    side, _ = quad(of_root, 0, 1, epsabs=0, epsrel=1e-12, limit=200)
    assert profile.side_area() == pytest.approx(side, rel=1e-10)


@pytest.mark.parametrize("profile", SLANT, ids=repr)
def test_a_slant_surface_is_that_of_the_outline(profile):
    """Sum the frusta or strips between 20,000 points of the outline drawn from the sections alone."""
    x = profile.length * (1 - np.linspace(1, 0, 20_001) ** 2)
    area = profile.area(x)
    if hasattr(profile, "inner_diameter"):
        r = profile.radius(x)
        chords = np.hypot(np.diff(x), np.diff(area / (2 * np.pi * r)) / 2)
        side = 2 * np.sum(np.pi * (r[1:] + r[:-1]) * chords)
    elif hasattr(profile, "diameter"):
        radius = np.sqrt(area / np.pi)
        side = np.sum(np.pi * (radius[1:] + radius[:-1]) * np.hypot(np.diff(x), np.diff(radius)))
    else:
        side = 2 * profile.width * np.sum(np.hypot(np.diff(x), np.diff(area / profile.width) / 2))
        if not profile.guarded_edges:
            side += 2 * np.trapezoid(area / profile.width, x)
    assert profile.side_area() == pytest.approx(side, rel=1e-7)


def test_a_slant_surface_of_a_thin_fin_is_the_projected_one():
    thin = Triangular(L, W, 1e-7, slant_surface=True)
    assert thin.side_area() == pytest.approx(Triangular(L, W, 1e-7).side_area(), rel=1e-11)


@pytest.mark.parametrize("profile", [*AT_HALF, *SLANT, Annular(**RING)], ids=repr)
def test_every_shape_is_a_profile_finite_to_its_tip(profile):
    assert isinstance(profile, Profile)
    assert hash(profile) == hash(
        type(profile)(**{name: getattr(profile, name) for name in profile.__match_args__} | flags(profile))
    )
    for n in (0, 1, 7):
        x = np.linspace(0, profile.length, n)
        assert profile.area(x).shape == profile.perimeter(x).shape == (n,)
        assert np.all(profile.area(x) >= 0)
        assert np.all(np.isfinite(profile.perimeter(x)))


def flags(profile):
    return {
        name: getattr(profile, name) for name in ("guarded_edges", "slant_surface") if hasattr(profile, name)
    }


# --- tables -----------------------------------------------------------------------------------------

ROWS = {"positions": [0, 0.01, 0.04], "areas": [4e-5, 3e-5, 1e-5], "perimeters": [0.03, 0.02, 0.02]}


@settings(deadline=None, max_examples=50)
@given(st.lists(st.tuples(*[st.floats(0.1, 10.0)] * 3), min_size=2, max_size=12), st.integers(0, 10))
def test_a_table_is_straight_between_its_rows(rows, seed):
    steps, areas, perimeters = np.array(rows).T
    positions = np.concatenate([[0.0], np.cumsum(steps)[:-1]])
    profile = Table(positions, areas, perimeters)
    x = np.random.default_rng(seed).uniform(0, positions[-1], 20)
    assert profile.area(x) == pytest.approx(np.interp(x, positions, areas), rel=1e-12)
    assert profile.perimeter(x) == pytest.approx(np.interp(x, positions, perimeters), rel=1e-12)
    assert profile.area(positions) == pytest.approx(areas, rel=1e-12)
    assert profile.length == positions[-1]
    assert profile.side_area() == pytest.approx(quad_of_rows(positions, perimeters), rel=1e-12)
    assert profile.breaks.tolist() == positions[1:-1].tolist()


def quad_of_rows(positions, values):
    return math.fsum(
        (b - a) * (p + q) / 2
        for a, b, p, q in zip(positions, positions[1:], values, values[1:], strict=False)
    )


def test_a_jump_holds_from_its_second_row_on():
    shaft = Table([0, 0.05, 0.05, 0.1], [4e-5, 3e-5, 1e-5, 1e-5], [0.03, 0.03, 0.02, 0.01])
    assert shaft.area(np.array([0, 0.025, 0.05 - 1e-12, 0.05, 0.075, 0.1])) == pytest.approx(
        [4e-5, 3.5e-5, 3e-5, 1e-5, 1e-5, 1e-5]
    )
    assert shaft.perimeter(np.array([0.05, 0.1])) == pytest.approx([0.02, 0.01])
    assert shaft.side_area() == pytest.approx(0.05 * 0.03 + 0.05 * 0.015)
    assert shaft.breaks.tolist() == [0.05]


def test_a_table_keeps_copies_and_is_equal_to_one_of_the_same_rows():
    areas = np.array(ROWS["areas"])
    table = Table(**ROWS | {"areas": areas})
    areas[0] = 1.0
    assert table.area(np.zeros(1)) == pytest.approx([4e-5])
    assert table == Table(**ROWS)
    assert hash(table) == hash(Table(**ROWS))
    assert table != Table(**ROWS | {"areas": [4e-5, 3e-5, 2e-5]})
    with pytest.raises(ValueError, match="read-only"):
        table.areas[0] = 1.0
    with pytest.raises(AttributeError):
        table.areas = areas


WRONG = {
    "positions must begin with 0 at the base, got 0.001 in row 1": {"positions": [0.001, 0.01, 0.04]},
    "positions must rise from row to row, got 0.01 after 0.04 in row 3": {"positions": [0, 0.04, 0.01]},
    "positions must be finite, got nan in row 2": {"positions": [0, math.nan, 0.04]},
    "positions must have two rows or more, got 1": {"positions": [0]},
    "positions may repeat only between base and tip, where the shape jumps: row 2": {
        "positions": [0, 0, 0.04]
    },
    "positions may repeat only between base and tip, where the shape jumps: row 3": {"positions": [0, 1, 1]},
    "positions may hold a value twice, for a jump, not more: 0.01 in row 4": {
        "positions": [0, 0.01, 0.01, 0.01, 0.04]
    },
    "positions must be one column, got an array of shape (1, 2)": {"positions": [[0, 0.01]]},
    "areas must have as many rows as positions, got 2 for 3": {"areas": [4e-5, 3e-5]},
    "areas must be positive and finite, got 0.0 in row 3": {"areas": [4e-5, 3e-5, 0.0]},
    "perimeters must be positive and finite, got -0.02 in row 2": {"perimeters": [0.03, -0.02, 0.02]},
    "perimeters must be positive and finite, got inf in row 1": {"perimeters": [math.inf, 0.02, 0.02]},
}


@pytest.mark.parametrize("sentence", WRONG)
def test_a_table_that_makes_no_sense_is_refused_with_its_column_and_row(sentence):
    with pytest.raises(ValueError) as refused:  # noqa: PT011 - the whole sentence is compared below
        Table(**ROWS | WRONG[sentence])
    assert str(refused.value) == sentence
