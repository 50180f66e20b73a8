"""The overview: what a rig can tell in principle, and the fin drawn to scale."""

from pathlib import Path
from typing import Any

import pytest

from finback import overview
from finback.rig import Rig


def rig_with(*places: str, fin: dict[str, Any] | None = None, **tables: Any) -> Rig:
    """Return a pin of 100 mm with sensors: "12" for one on the fin at 12 mm, else the place it reads."""
    sensors: dict[str, Any] = {}
    for number, place in enumerate(places):
        sensors[f"S{number}"] = {"at": f"{place} mm"} if place.isdecimal() else {"on": place}
    shape = {"profile": "pin", "length": "100 mm", "diameter": "8 mm", **(fin or {})}
    return Rig.from_dict({"title": "a pin", "fin": shape, "sensors": sensors, **tables})


def told(rig: Rig) -> tuple[bool, bool, bool]:
    """Return whether h, k and the joint can be told."""
    h, k, joint = (telling.possible for telling in overview.tellings(rig))
    return h, k, joint


STATED = {"conductivity": "167 W/(m K) +/- 5 %"}
ALONG = ("10", "40", "90")


# m² = hP/(kA) and q = -k A dT/dx at the base (Incropera, Fundamentals of Heat and Mass Transfer, 3.6): the
# shape gives h/k, heat or a stated k parts the two, and only a plate sensor sees the step at the joint.
@pytest.mark.parametrize(
    ("places", "material", "expected"),
    [
        ((*ALONG, "air"), {}, (False, False, False)),
        ((*ALONG, "air", "plate"), {}, (False, False, False)),
        ((*ALONG, "air", "heater"), {}, (False, False, False)),
        ((*ALONG, "air"), STATED, (True, False, False)),
        ((*ALONG, "air", "plate"), STATED, (True, False, True)),
        ((*ALONG, "air", "heat"), {}, (True, True, False)),
        ((*ALONG, "air", "heat", "plate"), {}, (True, True, True)),
        ((*ALONG, "air", "heat", "plate"), STATED, (True, True, True)),
        (("10", "air", "plate"), STATED, (False, False, False)),
        (("10", "air", "plate", "heat"), STATED, (True, True, True)),
        (("10", "90", "plate", "heat"), {}, (False, False, False)),
    ],
)
def test_what_can_be_told(
    places: tuple[str, ...], material: dict[str, str], expected: tuple[bool, ...]
) -> None:
    assert told(rig_with(*places, material=material)) == expected


def test_an_unknown_tip_temperature_asks_for_one_more_sensor() -> None:
    known = {"tip": "fixed", "tip_temperature": "15 degC"}
    assert told(rig_with("10", "90", "air", fin=known, material=STATED))[0]
    assert not told(rig_with("10", "90", "air", fin={"tip": "fixed"}, material=STATED))[0]
    assert told(rig_with("10", "50", "90", "air", fin={"tip": "fixed"}, material=STATED))[0]


def test_what_cannot_be_told_apart_says_what_would_help() -> None:
    h, k, joint = overview.tellings(rig_with(*ALONG, "air", "plate"))
    help_ = "state k in [material] or measure the heat into the fins"
    assert h.reason == f"cannot be told apart from k, only h/k can: {help_}"
    assert k.reason == f"cannot be told apart from h: {help_}"
    assert joint.reason == f"cannot be told, only its product with k can: {help_}"
    bounded, *_ = overview.tellings(rig_with(*ALONG, "air", "heater"))
    assert bounded.reason.endswith("(the heater's power is only an upper bound on it)")


def sensor_line(drawing: str) -> str:
    (line,) = [line for line in drawing.splitlines() if "●" in line]
    return line


def test_the_drawing_is_to_scale() -> None:
    drawing = overview.draw(rig_with("0", "50", "100", "air"))
    names, *_, scale = drawing.splitlines()
    fin = sensor_line(drawing)
    marks = [column for column, character in enumerate(fin) if character == "●"]
    assert fin[marks[0] - 1] == "│"
    assert fin[marks[2] + 1] == "│"
    assert marks[1] - marks[0] == pytest.approx((marks[2] - marks[0]) / 2, abs=0.5)
    assert [names.index(name) for name in ("S0", "S1", "S2")] == marks
    assert scale.split() == ["0", "100", "mm"]
    assert scale.rstrip().endswith("100 mm")
    assert len(scale) - 1 == marks[2]


def test_names_without_room_are_left_out_of_the_drawing_and_their_sensors_are_not() -> None:
    drawing = overview.draw(rig_with("10", "11", "90", "air"))
    assert drawing.splitlines()[0].split() == ["S0", "S2"]
    assert sensor_line(drawing).count("●") == 3


def thicknesses(drawing: str) -> list[int]:
    """The half lines that stand above the sensors' line at each character."""
    lines = drawing.splitlines()
    middle = next(number for number, line in enumerate(lines) if "●" in line)
    above = [line[7:71].ljust(64) for line in lines[1:middle]]
    below = [line[7:71].ljust(64) for line in lines[middle + 1 : 2 * middle]]
    counts = [[{"█": 2, "▄": 1, "▀": 1, " ": 0}[mark] for mark in line] for line in above + below[::-1]]
    upper, lower = counts[: len(above)], counts[len(above) :]
    assert upper == lower  # the fin is symmetric
    return [sum(column) for column in zip(*upper, strict=True)]


def shaped(profile: str, **fin: str) -> Rig:
    return Rig.from_dict({"fin": {"profile": profile, **fin}, "sensors": {"S": {"at": "5 mm"}}})


def test_a_taper_is_drawn_to_scale() -> None:
    drawing = overview.draw(shaped("cone", length="64 mm", diameter="16.2 mm", tip_diameter="7.8 mm"))
    # a millimetre a character, twice that a line: 8.1 and 3.9 mm at the ends, one of them in the middle line
    assert thicknesses(drawing)[0] == 7
    assert thicknesses(drawing)[-1] == 3
    assert thicknesses(drawing)[32] == 5
    assert "times larger" not in drawing


def test_a_thin_taper_is_drawn_larger_and_says_so() -> None:
    drawing = overview.draw(shaped("triangular", length="64 mm", width="90 mm", thickness="2 mm"))
    assert drawing.splitlines()[-1].strip() == "thickness drawn 3 times larger"
    assert thicknesses(drawing)[0] == 2
    assert thicknesses(drawing)[-1] == 0
    assert sensor_line(drawing).endswith("─│ tip")  # it ends sharp


def test_a_stout_fin_is_drawn_shorter() -> None:
    drawing = overview.draw(shaped("pin", length="20 mm", diameter="10 mm"))
    assert max(map(len, drawing.splitlines())) < 50
    assert len(drawing.splitlines()) < 12
    stouter = overview.draw(shaped("pin", length="20 mm", diameter="90 mm"))
    assert stouter.splitlines()[-1].strip() == "thickness drawn 5 times smaller"
    assert len(stouter.splitlines()) < 20


def test_an_annular_fin_stands_on_a_tube() -> None:
    sizes = {"inner_diameter": "25 mm", "outer_diameter": "55 mm", "thickness": "1 mm"}
    assert " tube ▌" in overview.draw(shaped("annular", **sizes))


def test_a_step_of_a_table_is_drawn_as_one(tmp_path: Path) -> None:
    rows = "0,78.54,31.416\n32,78.54,31.416\n32,28.27,18.85\n64,28.27,18.85\n"
    (tmp_path / "shape.csv").write_text("x [mm],area [mm^2],perimeter [mm]\n" + rows, encoding="utf-8")
    drawing = overview.draw(shaped("table", file=str(tmp_path / "shape.csv")))
    assert set(thicknesses(drawing)[:32]) == {4}  # 5 mm, one of them in the middle line
    assert set(thicknesses(drawing)[32:]) == {2}  # 3 mm, one of them in the middle line


def test_the_air_and_the_material_are_told() -> None:
    document = {
        "fin": {"profile": "pin", "length": "90 mm", "diameter": "8 mm", "orientation": "vertical"},
        "material": {"name": "copper"},
        "air": {"speed": "0 m/s", "humidity": "45 %", "pressure": "98 kPa"},
        "sensors": {"S": {"at": "5 mm"}},
    }
    text = overview.describe(Rig.from_dict(document), None, [], "Said why.")
    assert "k      401 W/(m K) +/- 3 %, of copper, pure by the handbook at 27 °C" in text
    assert "air    still\nair    pressure 98 kPa, humidity 45 %\naxis   vertical" in text
    document["material"] = {"name": "EN AW-6060, heat 4711", "conductivity": "201 W/(m K) +/- 2 %"}
    document["air"] = {"speed": "2.5 m/s", "correlation": "Hilpert"}
    text = overview.describe(Rig.from_dict(document), None, [], "Said why.")
    assert "201 W/(m K) +/- 2 %, stated (EN AW-6060, heat 4711)" in text
    assert "air    driven, 2.5 m/s, by hilpert" in text


def test_a_plate_is_drawn_where_one_is_read() -> None:
    assert "plate ▌" in overview.draw(rig_with("10", "90", "air", "plate"))
    assert "plate" not in overview.draw(rig_with("10", "90", "air"))


def test_the_whole_fits_80_columns_and_cannot_write_to_the_terminal() -> None:
    sensors = {f"thermocouple {'x' * 30} {n}": {"at": f"{n} mm", "position": "0.5 mm"} for n in (1, 50, 99)}
    shape = {"profile": "pin", "length": "100 mm", "diameter": "8 mm"}
    rig = Rig.from_dict({"title": "t" * 150, "fin": shape, "sensors": {**sensors, "TA": {"on": "air"}}})
    text = overview.describe(rig, ["run\x1b[2J", "b" * 300], ["adiabatic tip"], "Said why.")
    assert "\x1b" not in text
    assert max(map(len, text.splitlines())) <= 80


def test_it_lists_runs_candidates_and_what_was_assumed() -> None:
    text = overview.describe(
        rig_with(*ALONG, "air"), ["a", "b"], ["adiabatic tip", "convective tip"], "Said why."
    )
    assert "2 runs: a, b" in text
    assert "Candidates\n  adiabatic tip\n  convective tip\n" in text
    assert "Assumed\n" in text
    assert (
        "run"
        not in overview.describe(rig_with(*ALONG, "air"), None, [], "Said why.")
        .split("Candidates")[1]
        .lower()
    )
