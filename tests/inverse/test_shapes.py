"""Every profile that [fin] can describe: its keys, what it becomes, and what is refused of it.

Shapes are those of Gardner, Trans. ASME 67 (1945) 621, with s the distance from the tip over the length.
"""

import math
from collections.abc import Callable

import numpy as np
import pytest

from finback import shapes
from finback.candidates import enumerate_candidates
from finback.errors import InputError
from finback.rig import Rig
from finback.rig_file import PROFILES, FinSection

STRAIGHT = {"length": "60 mm", "width": "30 mm", "thickness": "2 mm +/- 0.02 mm"}
PIN = {"length": "60 mm", "diameter": "6 mm"}
ANNULAR = {"inner_diameter": "25 mm", "outer_diameter": "55 mm", "thickness": "1 mm"}
SENSORS = {"T1": {"at": "5 mm"}, "TA": {"on": "air"}}


def rig(profile: str, **fin: str) -> Rig:
    return Rig.from_dict({"fin": {"profile": profile, **fin}, "sensors": SENSORS})


def flat(thickness: Callable[[np.ndarray], np.ndarray]) -> Callable[[np.ndarray], tuple]:
    return lambda s: (0.03 * thickness(s), 2 * 0.03 + 2 * thickness(s))


def round_(diameter: Callable[[np.ndarray], np.ndarray]) -> Callable[[np.ndarray], tuple]:
    return lambda s: (math.pi / 4 * diameter(s) ** 2, math.pi * diameter(s))


def ring(thickness: Callable[[np.ndarray], np.ndarray]) -> Callable[[np.ndarray], tuple]:
    def section(s: np.ndarray) -> tuple:
        r = 0.0125 + 0.015 * (1 - s)
        return 2 * math.pi * r * thickness(r), 4 * math.pi * r

    return section


# section and perimeter by s, the distance from the tip over the length
EXPECTED = {
    "pin": (PIN, round_(lambda s: 0.006 + 0 * s)),
    "rectangular": (STRAIGHT, flat(lambda s: 0.002 + 0 * s)),
    "trapezoidal": (STRAIGHT | {"tip_thickness": "1 mm"}, flat(lambda s: 0.001 + 0.001 * s)),
    "triangular": (STRAIGHT, flat(lambda s: 0.002 * s)),
    "concave-parabolic": (STRAIGHT, flat(lambda s: 0.002 * s**2)),
    "convex-parabolic": (STRAIGHT, flat(lambda s: 0.002 * np.sqrt(s))),
    "cone": (PIN | {"tip_diameter": "2 mm"}, round_(lambda s: 0.002 + 0.004 * s)),
    "concave-pin": (PIN, round_(lambda s: 0.006 * s**2)),
    "convex-pin": (PIN, round_(lambda s: 0.006 * np.sqrt(s))),
    "annular": (ANNULAR, ring(lambda r: 0.001 + 0 * r)),
    "hyperbolic-annular": (ANNULAR, ring(lambda r: 0.001 * 0.0125 / r)),
}


def test_every_profile_of_a_file_has_a_shape() -> None:
    assert tuple(shapes.SHAPES) == PROFILES
    assert set(EXPECTED) | {"table"} == set(PROFILES)
    keys = {key for shape in shapes.SHAPES.values() for key in (*shape.needed, *shape.optional)}
    assert keys == set(shapes.EXAMPLES)
    assert keys <= set(FinSection.model_fields)


@pytest.mark.parametrize("name", EXPECTED)
def test_a_profile_has_the_section_and_perimeter_of_its_shape(name: str) -> None:
    fin, section = EXPECTED[name]
    found = rig(name, **fin)
    profile = found.profile()
    x = np.linspace(0.0, found.length, 9)
    area, perimeter = section(1 - x / found.length)
    np.testing.assert_allclose(profile.area(x), area, rtol=1e-12, atol=1e-18)
    np.testing.assert_allclose(profile.perimeter(x), perimeter, rtol=1e-12, atol=1e-15)
    assert found.length == pytest.approx(0.015 if "outer_diameter" in fin else 0.06)
    assert set(found.geometry) == set(fin)


def test_uncertainties_stay_with_their_keys_and_lengths_can_be_changed() -> None:
    found = rig("trapezoidal", **STRAIGHT, tip_thickness="1 mm +/- 0.1 mm")
    assert found.geometry["thickness"].sd == pytest.approx(0.02e-3)
    assert found.geometry["tip_thickness"].sd == pytest.approx(0.1e-3)
    tip = np.array([0.06])
    assert found.profile({"tip_thickness": 0.0005}).area(tip)[0] == pytest.approx(0.03 * 0.0005)
    wider = rig("annular", **ANNULAR).profile({"outer_diameter": 0.065})
    assert wider.length == pytest.approx(0.02)


def test_a_cone_is_sharp_unless_its_tip_is_given() -> None:
    assert not rig("cone", **PIN).has_tip_face
    assert not rig("cone", **PIN, tip_diameter="0 mm").has_tip_face
    assert rig("cone", **PIN, tip_diameter="2 mm").has_tip_face
    assert rig("cone", **PIN, tip_diameter="9 mm").has_tip_face  # a pin may widen towards its tip
    assert not rig("trapezoidal", **STRAIGHT, tip_thickness="0 mm").has_tip_face


def test_guarded_edges_and_a_slant_surface_change_the_perimeter() -> None:
    at = np.zeros(1)
    assert rig("triangular", **STRAIGHT, edges="guarded").profile().perimeter(at)[0] == pytest.approx(0.06)
    assert rig("triangular", **STRAIGHT, edges="exposed").profile().perimeter(at)[0] == pytest.approx(0.064)
    slant = rig("triangular", **STRAIGHT, edges="guarded", surface="slant")
    assert slant.slant_surface
    assert slant.profile().side_area() == pytest.approx(2 * 0.03 * math.hypot(0.06, 0.001), rel=1e-12)
    cone = rig("cone", **PIN, surface="slant").profile()
    assert cone.side_area() == pytest.approx(math.pi * 0.003 * math.hypot(0.06, 0.003), rel=1e-9)
    assert not rig("cone", **PIN, surface="projected").slant_surface


@pytest.mark.parametrize("name", [name for name, shape in shapes.SHAPES.items() if shape.straight])
def test_edges_that_are_not_stated_are_a_finding(name: str) -> None:
    def said(found: Rig) -> bool:
        return any(finding.evidence.get("key") == "edges" for finding in found.assumed)

    assert said(rig(name, **EXPECTED[name][0]))
    assert not said(rig(name, **EXPECTED[name][0], edges="exposed"))


@pytest.mark.parametrize(
    ("name", "tips"),
    [
        ("pin", ["adiabatic tip", "convective tip", "fixed tip"]),
        ("trapezoidal", ["adiabatic tip", "convective tip", "fixed tip"]),
        ("annular", ["adiabatic tip", "convective tip", "fixed tip"]),
        ("triangular", ["adiabatic tip"]),
        ("convex-pin", ["adiabatic tip"]),
    ],
)
def test_a_tip_without_a_face_has_one_candidate(name: str, tips: list[str]) -> None:
    found = rig(name, **EXPECTED[name][0])
    assert [candidate.name for candidate in enumerate_candidates(found)] == tips


THROUGH = "write the diameter of the rim, which is larger than that of the tube"
OTHER_TIPS = 'write "adiabatic", "convective" or "fixed", or leave tip out'


@pytest.mark.parametrize(
    ("profile", "fin", "sentence"),
    [
        ("trapezoidal", STRAIGHT,
         '[fin]: a trapezoidal fin needs the key "tip_thickness"; add a line such as tip_thickness = '
         '"1 mm".'),
        ("triangular", STRAIGHT | {"tip_thickness": "1 mm"}, "[fin] tip_thickness: a triangular fin has no "
         "tip_thickness; it is described by length, width, thickness."),
        ("pin", PIN | {"tip_diameter": "1 mm"},
         "[fin] tip_diameter: a pin has no tip_diameter; it is described by length, diameter."),
        ("cone", PIN | {"width": "1 mm"},
         "[fin] width: a cone has no width; it is described by length, diameter, tip_diameter."),
        ("annular", ANNULAR | {"length": "15 mm"}, "[fin] length: an annular fin has no length; it is "
         "described by inner_diameter, outer_diameter, thickness."),
        ("annular", {"outer_diameter": "55 mm", "thickness": "1 mm"}, "[fin]: an annular fin needs the key "
         '"inner_diameter"; add a line such as inner_diameter = "25 mm".'),
        ("annular", ANNULAR | {"outer_diameter": "20 mm"},
         f'[fin] outer_diameter: "20 mm" is not above the inner diameter, "25 mm"; {THROUGH}.'),
        ("hyperbolic-annular", ANNULAR | {"outer_diameter": "2.5 cm"},
         f'[fin] outer_diameter: "2.5 cm" is not above the inner diameter, "25 mm"; {THROUGH}.'),
        ("trapezoidal", STRAIGHT | {"tip_thickness": "-1 mm"},
         '[fin] tip_thickness: "-1 mm" is negative; write zero or a positive value.'),
        ("trapezoidal", STRAIGHT | {"tip_thickness": "0 mm +/- 0.1 mm"}, "[fin] tip_thickness: the "
         'uncertainty in "0 mm +/- 0.1 mm" is as large as the value; write a standard uncertainty smaller '
         "than the value."),
        ("pin", PIN | {"surface": "slant"},
         "[fin] surface: a pin has no slant that could be counted or not; leave surface out."),
        ("rectangular", STRAIGHT | {"surface": "projected"},
         "[fin] surface: a rectangular fin has no slant that could be counted or not; leave surface out."),
        ("annular", ANNULAR | {"surface": "slant"},
         "[fin] surface: an annular fin has no slant that could be counted or not; leave surface out."),
        ("triangular", STRAIGHT | {"surface": "slanted"},
         '[fin] surface: "slanted" is no kind of surface; the nearest known one is "slant".'),
        ("cone", PIN | {"edges": "guarded"}, "[fin] edges: a cone has no edges; leave edges out."),
        ("annular", ANNULAR | {"edges": "exposed"},
         "[fin] edges: an annular fin has no edges; leave edges out."),
        ("cone", PIN | {"tip": "infinite"},
         f"[fin] tip: a cone cannot go on for ever as it ends; {OTHER_TIPS}."),
        ("annular", ANNULAR | {"tip": "infinite"},
         f"[fin] tip: an annular fin cannot go on for ever as it ends; {OTHER_TIPS}."),
        ("triangular", STRAIGHT | {"tip": "fixed"}, "[fin] tip: a triangular fin ends too sharp to be held "
         'at a temperature; write tip = "adiabatic", or leave tip out.'),
        ("cone", PIN | {"tip": "fixed"}, "[fin] tip: this cone ends too sharp to be held at a temperature; "
         'write tip = "adiabatic", or leave tip out.'),
        ("pin", PIN | {"orientation": "upright"}, '[fin] orientation: "upright" is no orientation; write one '
         'of "vertical", "horizontal".'),
        ("pin", PIN | {"length": "1e-200 mm", "diameter": "1e-200 mm"}, "[fin]: section_area must be "
         "positive and finite, got 0.0; check the lengths and their units."),
    ],
)  # fmt: skip
def test_a_wrong_shape_is_refused_in_a_sentence(profile: str, fin: dict[str, str], sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        rig(profile, **fin)
    assert str(caught.value) == sentence


def test_a_sensor_beyond_an_annular_fin_is_told_how_long_that_is() -> None:
    with pytest.raises(InputError) as caught:
        Rig.from_dict({"fin": {"profile": "annular", **ANNULAR}, "sensors": {"T1": {"at": "20 mm"}}})
    assert str(caught.value) == (
        '[sensors] T1 at: "20 mm" is beyond the fin, whose length is "15 mm"; write the distance from the '
        "base, at most the length."
    )
    assert Rig.from_dict({"fin": {"profile": "annular", **ANNULAR}, "sensors": {"T1": {"at": "15 mm"}}})


def test_a_fixed_tip_may_be_stated_where_there_is_a_face() -> None:
    assert rig("cone", **PIN, tip_diameter="2 mm", tip="fixed").tip == "fixed"
    assert rig("triangular", **STRAIGHT, tip="convective").tip == "convective"
