import sys
import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import matplotlib
import pytest

from finback.estimate import CandidateScore
from finback.quantity import Quantity
from finback.report import figures, scenes
from finback.rig import Rig, Sensor

SVG = "{http://www.w3.org/2000/svg}"
XLINK = "{http://www.w3.org/1999/xlink}href"


def parse(picture):
    return ElementTree.fromstring(picture.svg)  # noqa: S314  # our own file; an unescaped name would break it


def test_every_figure_is_drawn_as_png_and_svg(pictures):
    assert [picture.name for picture in pictures["pin"]] == list(figures.NAMES)
    for picture in pictures["pin"]:
        assert picture.png.startswith(b"\x89PNG\r\n\x1a\n")
        width = int.from_bytes(picture.png[16:20], "big")  # of the IHDR chunk, PNG specification 11.2.2
        assert width == figures.WIDTH * figures.DPI
        assert parse(picture).tag == f"{SVG}svg"


def test_the_same_estimate_gives_the_same_bytes(pictures, pin_estimate):
    assert figures.draw(pin_estimate) == pictures["pin"]
    for picture in pictures["pin"]:
        assert b"<dc:date>" not in picture.svg


def test_names_are_drawn_as_they_are_and_nothing_in_them_is_obeyed(pictures):
    for picture in pictures["hostile"]:
        root = parse(picture)
        tags = {element.tag.removeprefix(SVG) for element in root.iter() if isinstance(element.tag, str)}
        assert not tags & {"script", "foreignObject", "b", "a", "iframe"}
        for element in root.iter():
            assert (element.get(XLINK) or "#").startswith(("#", "data:image/png;base64,"))
    drawing = pictures["hostile"][0].svg
    assert b"$T_5$" in drawing  # the comment beside the glyphs: read as mathematics it would lose the "$"


def test_one_candidate_needs_no_bars(pictures):
    assert [picture.name for picture in pictures["rod"]] == ["drawing", "profile", "pairs"]


def test_unusual_rigs_can_be_drawn(pin_estimate, rod_estimate):
    many = {f"Fühler {i}": Sensor(f"Fühler {i}", "fin", 0.7 * i / 80) for i in range(80)}
    air = {f"温度{i}": Sensor(f"温度{i}", "air") for i in range(4)}
    plate = {f"P{i}": Sensor(f"P{i}", "plate") for i in range(3)}
    heat = {"a heater with a long name": Sensor("a heater with a long name", "heater")}
    crowded = replace(rod_estimate.rig, sensors=many | air | plate | heat, guarded_edges=True)
    sheet = replace(
        rod_estimate.rig,
        geometry={"length": Quantity(0.02), "width": Quantity(0.3), "thickness": Quantity(0.0004)},
        sensors={},
    )
    scores = tuple(CandidateScore(f"candidate {i}", 0.125, -1.0, 0.1, None, None, None) for i in range(8))
    for estimate in (
        replace(rod_estimate, rig=crowded),
        replace(rod_estimate, rig=sheet),
        replace(pin_estimate, candidates=scores),
    ):
        assert len(figures.draw(estimate)) >= 3


PIN = {"length": "60 mm", "diameter": "6 mm"}
FLAT = {"length": "60 mm", "width": "30 mm", "thickness": "2 mm"}
RING = {"inner_diameter": "25 mm", "outer_diameter": "55 mm", "thickness": "1 mm"}
SIZES = {
    "pin": PIN,
    "cone": PIN,
    "concave-pin": PIN,
    "convex-pin": PIN,
    "rectangular": FLAT,
    "trapezoidal": FLAT | {"tip_thickness": "3 mm"},
    "triangular": FLAT,
    "concave-parabolic": FLAT,
    "convex-parabolic": FLAT,
    "annular": RING,
    "hyperbolic-annular": RING,
    "table": {"file": "shape.csv"},
}
STEPPED = "0,78.54,31.416\n30,78.54,31.416\n30,28.27,18.85\n60,28.27,18.85\n"


@pytest.mark.parametrize("profile", SIZES)
def test_every_profile_can_be_drawn(pin_estimate, tmp_path, profile):
    (tmp_path / "shape.csv").write_text(f"x [mm],area [mm^2],perimeter [mm]\n{STEPPED}", encoding="utf-8")
    sensors = {"T1": {"at": "2 mm"}, "T2": {"at": "14 mm"}, "TP": {"on": "plate"}, "Q": {"on": "heat"}}
    fin = {"profile": profile} | SIZES[profile]
    if "file" in fin:
        fin["file"] = str(tmp_path / "shape.csv")
    rig = Rig.from_dict({"fin": fin, "sensors": sensors})
    drawing = figures.draw(replace(pin_estimate, rig=rig))[0]
    assert len(drawing.svg) > 5000
    words = drawing.svg.decode()
    assert ("tube" in words) == ("annular" in profile)  # the comment beside the glyphs


def test_a_step_is_drawn_upright(pin_estimate, tmp_path):
    (tmp_path / "shape.csv").write_text(f"x [mm],area [mm^2],perimeter [mm]\n{STEPPED}", encoding="utf-8")
    fin = {"profile": "table", "file": str(tmp_path / "shape.csv")}
    rig = Rig.from_dict({"fin": fin, "sensors": {"T1": {"at": "2 mm"}}})
    scene = scenes.drawing(replace(pin_estimate, rig=rig))
    assert scene.x.tolist() == pytest.approx([0, 30, 30, 60])
    assert scene.half.tolist() == pytest.approx([5, 5, 3, 3], rel=1e-3)


def test_nothing_is_kept_and_pyplot_is_not_needed(pin_estimate, monkeypatch):
    monkeypatch.setitem(sys.modules, "matplotlib.pyplot", None)  # importing it would fail
    before = {key: matplotlib.rcParams[key] for key in figures.STYLE}
    figures.draw(pin_estimate)
    assert {key: matplotlib.rcParams[key] for key in figures.STYLE} == before
