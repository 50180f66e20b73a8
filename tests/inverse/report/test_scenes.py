from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.report import layout, scenes
from finback.rig import Rig

PIN = {"length": "60 mm", "diameter": "6 mm"}
FLAT = {"length": "60 mm", "width": "30 mm", "thickness": "2 mm"}
RING = {"inner_diameter": "25 mm", "outer_diameter": "55 mm", "thickness": "1 mm"}


def test_a_density_is_that_of_the_draws(pin_estimate):
    found = scenes.pairs(pin_estimate)

    assert [quantity.label.split(",")[0] for quantity in found] == ["h", "k", "R″", "T base"]
    for quantity in found:
        held = np.trapezoid(quantity.posterior, quantity.grid)
        assert held == pytest.approx(1.0, abs=0.01)
        middle = np.nanmedian(quantity.draws)
        below = np.trapezoid(np.where(quantity.grid < middle, quantity.posterior, 0.0), quantity.grid)
        assert below == pytest.approx(0.5, abs=0.02)


def test_the_prior_of_h_is_the_lognormal_it_was_drawn_from(pin_estimate):
    h = scenes.pairs(pin_estimate)[0]

    expected = np.exp(-0.5 * np.square(np.log(h.grid / 50.0) / 1.5)) / (h.grid * 1.5 * np.sqrt(2 * np.pi))
    np.testing.assert_allclose(h.prior, expected, rtol=0.15)  # 2000 draws


def test_contours_of_a_normal_cloud_lie_where_the_chi_square_of_two_degrees_says():
    rng = np.random.default_rng(3)
    window, grid = (-4.0, 4.0), np.linspace(-4.0, 4.0, 9)
    one, other = (
        scenes.Paired(name, rng.standard_normal(200_000), window, grid, grid, None) for name in ("a", "b")
    )
    cloud = scenes.cloud(one, other)

    # density over its peak is exp(-r²/2), and the probability inside r is 1 - exp(-r²/2): 0.05 and 0.5
    outer, inner = np.array(cloud.levels) / cloud.density.max()
    assert outer == pytest.approx(0.05, rel=0.1)
    assert inner == pytest.approx(0.5, rel=0.1)


def test_draws_of_a_candidate_without_a_joint_are_left_out_of_its_panel(pin_estimate):
    joint = scenes.pairs(pin_estimate)[2]
    assert np.isnan(joint.draws).any()
    assert np.isfinite(joint.posterior).all()


def test_quantities_that_are_one_and_the_same_are_drawn_once(rod_estimate):
    labels = [quantity.label for quantity in scenes.pairs(rod_estimate)]
    assert labels == ["h/k, 1/m", "T base, °C"]


def test_temperatures_are_drawn_in_degrees_celsius(pin_estimate):
    scene = scenes.profile(pin_estimate)
    plate = next(point for point in scene.points if point.place == "plate")
    assert plate.measured == pytest.approx(80.0, abs=1.0)
    assert scene.air == pytest.approx(21.4, abs=0.1)
    assert scene.x[-1] == pytest.approx(120.0)


@given(st.lists(st.floats(0.0, 4.0), min_size=1, max_size=60), st.floats(0.01, 0.5))
def test_names_never_overlap_and_keep_their_order(wanted, apart):
    wanted = np.sort(np.array(wanted))
    places = layout.spread(wanted, apart, 0.0, 4.0)
    possible = min(apart, 4.0 / max(1, len(wanted) - 1))
    assert np.all(np.diff(places) >= possible - 1e-9)
    assert places.min() >= -1e-9
    assert places.max() <= 4.0 + 1e-9


def test_names_with_room_stay_where_they_belong():
    wanted = np.array([0.5, 1.5, 2.5])
    np.testing.assert_allclose(layout.spread(wanted, 0.4, 0.0, 4.0), wanted)


def make_drawing(length, base, tip, tube=None):
    marks = (scenes.Mark("T1", "fin", 0.5 * length),)
    section = scenes.Section("round", base, base, tip, False, "", "Section")
    ends = np.array([0.0, length]), np.array([base, tip]) / 2
    return scenes.DrawingScene(length, *ends, section, tube, False, "convective tip", marks)


def test_a_thin_taper_is_drawn_larger_than_a_thin_plate():
    plate, taper = (layout.lay_out(make_drawing(60.0, 3.0, tip)) for tip in (3.0, 1.0))
    assert (plate.stretch, taper.stretch) == (1, 3)
    scene = make_drawing(60.0, 3.0, 1.0)
    half = taper.half(scene, np.array([0.0, 30.0, 60.0]))
    np.testing.assert_allclose(half / taper.scale / taper.stretch, [1.5, 1.0, 0.5], rtol=1e-12)


@pytest.mark.parametrize(("length", "tube"), [(15.0, 12.5), (25.0, 12.5), (50.0, 5.0), (10.0, 29.0)])
def test_an_annular_fin_is_drawn_with_the_axis_of_its_tube_to_scale(length, tube):
    lay = layout.lay_out(make_drawing(length, 1.0, 1.0, tube))
    assert lay.tube_axis > 0.1
    assert lay.right <= layout.FIN_END + 1e-9
    assert (lay.left - lay.tube_axis) / (lay.right - lay.left) == pytest.approx(tube / length)
    assert lay.left - lay.plate > lay.tube_axis  # the wall of the tube stays clear of its axis


def test_a_tube_far_larger_than_its_fin_is_drawn_without_its_axis():
    lay = layout.lay_out(make_drawing(10.0, 1.0, 1.0, 200.0))
    assert lay.tube_axis is None
    assert lay.right - lay.left > 3.0


@pytest.mark.parametrize(
    ("profile", "fin", "kind", "text", "caption"),
    [
        ("pin", PIN, "round", "⌀ 6 mm", "Section"),
        ("cone", PIN | {"tip_diameter": "2 mm"}, "round", "⌀ 6 to 2 mm", "Section"),
        ("rectangular", FLAT | {"edges": "guarded"}, "flat", "30 × 2 mm", "Section, edges guarded"),
        ("triangular", FLAT, "flat", "30 × 2 to 0 mm", "Section"),
        ("annular", RING, "ring", "⌀ 55 on ⌀ 25 mm", "Face"),
        ("hyperbolic-annular", RING, "ring", "⌀ 55 on ⌀ 25 mm", "Face"),
    ],
)
def test_the_section_is_that_of_the_profile(pin_estimate, profile, fin, kind, text, caption):
    rig = Rig.from_dict({"fin": {"profile": profile, **fin}, "sensors": {"T1": {"at": "5 mm"}}})
    scene = scenes.drawing(replace(pin_estimate, rig=rig))
    assert (scene.section.kind, scene.section.text, scene.section.caption) == (kind, text, caption)
    assert scene.tube == (12.5 if kind == "ring" else None)
    assert scene.x[0] == 0
    assert scene.x[-1] == pytest.approx(scene.length)
    thickness = 1e3 * (rig.geometry.get("diameter") or rig.geometry["thickness"]).value
    assert scene.thickness == pytest.approx(thickness)


@pytest.mark.parametrize(("length", "thickness"), [(700.0, 9.5), (120.0, 8.0), (10.0, 50.0), (2000.0, 0.5)])
def test_the_drawing_fits_its_page_and_says_when_it_is_not_to_scale(length, thickness):
    scene = make_drawing(length, thickness, thickness)
    lay = layout.lay_out(scene)
    assert lay.right <= layout.FIN_END + 1e-9
    assert lay.axis + lay.plate_half < lay.height
    assert lay.axis - lay.plate_half > lay.dimension
    drawn = lay.thickness / (lay.right - lay.left)
    assert drawn == pytest.approx(lay.stretch * thickness / length)
    assert (lay.stretch == 1) == (thickness / length > 0.03)
