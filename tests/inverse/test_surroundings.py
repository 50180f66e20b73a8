"""The air of a rig and how its fin stands in it: what may be written, what is refused, what flow it makes."""

from typing import Any

import pytest

from finback.errors import InputError
from finback.models.exposure import ExposedDisc, ExposedPin, ExposedPlate, Stand
from finback.rig import Rig
from finback.surroundings import BAR_SCATTER, Likeness, liken

PIN = {"profile": "pin", "length": "60 mm", "diameter": "6 mm"}
PLATE = {"profile": "triangular", "length": "60 mm", "width": "80 mm", "thickness": "3 mm"}
SENSORS = {"T1": {"at": "5 mm"}, "TA": {"on": "air"}}


def rig(fin: dict[str, str], **air: Any) -> Rig:
    return Rig.from_dict({"fin": fin, "air": air, "sensors": SENSORS})


def likeness(fin: dict[str, str], **air: Any) -> Likeness:
    found = rig(fin, **air)
    return liken(found.profile_name, found.geometry, found.profile(), found.surroundings)


def said(found: Rig) -> list[str]:
    keys = ("speed", "orientation")
    return [finding.message for finding in found.assumed if finding.evidence.get("key") in keys]


def test_everything_of_the_air_is_read() -> None:
    found = rig(
        PIN | {"orientation": "vertical"},
        speed="2.5 m/s +/- 10 %",
        correlation="Hilpert",
        pressure="980 hPa",
        humidity="45 % +/- 5 %",
    ).surroundings
    assert found.speed is not None
    assert (found.speed.value, found.speed.sd) == (2.5, 0.25)
    assert found.correlation == "hilpert"
    assert found.pressure is not None
    assert found.pressure.value == pytest.approx(98_000)
    assert found.humidity is not None
    assert (found.humidity.value, found.humidity.sd) == (pytest.approx(0.45), pytest.approx(0.05))
    assert found.orientation == "vertical"


@pytest.mark.parametrize(
    ("fin", "air", "driven"),
    [
        ({}, {}, None),
        ({}, {"expected_h": "45 W/(m^2 K)"}, None),
        ({}, {"speed": "2 m/s"}, True),
        ({}, {"speed": "0 m/s"}, False),
        ({}, {"correlation": "hilpert"}, True),
        ({}, {"correlation": "churchill-chu cylinder"}, False),
        ({"orientation": "vertical"}, {}, False),
        ({"orientation": "vertical"}, {"speed": "2 m/s"}, True),
    ],
)
def test_whether_the_air_is_driven_is_said_by_speed_correlation_or_orientation(
    fin: dict[str, str], air: dict[str, str], driven: bool | None
) -> None:
    assert rig(PIN | fin, **air).surroundings.driven is driven


def test_still_air_that_is_not_stated_is_a_finding_and_so_is_an_orientation() -> None:
    horizontal = (
        "It is not stated how the fin stands in the still air: its axis is taken to be horizontal; state it "
        'with orientation = "vertical" or "horizontal" in [fin].'
    )
    still = (
        "No speed of the air is stated: it is taken to be still, for the coefficient of a healthy fin; state "
        'it with speed = "2.5 m/s" in [air].'
    )
    assert said(rig(PIN)) == []
    assert said(rig(PIN, speed="0 m/s")) == [horizontal]
    assert said(rig(PIN | {"orientation": "vertical"})) == [still]
    assert said(rig(PIN | {"orientation": "vertical"}, speed="0 m/s")) == []
    assert said(rig(PIN | {"orientation": "vertical"}, expected_h="9 W/(m^2 K)")) == []
    assert said(rig(PIN, speed="2 m/s")) == []


@pytest.mark.parametrize(
    ("fin", "air", "exposure"),
    [
        (PIN, {"speed": "0 m/s"}, ExposedPin(0.06, pytest.approx(0.006))),
        (PIN | {"orientation": "vertical"}, {}, ExposedPin(0.06, pytest.approx(0.006), Stand.VERTICAL)),
        (PIN | {"profile": "cone"}, {}, ExposedPin(0.06, pytest.approx(0.003))),
        (PIN | {"profile": "cone", "tip_diameter": "2 mm"}, {}, ExposedPin(0.06, pytest.approx(0.004))),
        (PLATE, {"speed": "2 m/s"}, ExposedPlate(along=0.08, across=0.06)),
        (PLATE, {"speed": "0 m/s"}, ExposedPlate(along=0.08, across=0.06)),
        (PLATE | {"orientation": "vertical"}, {}, ExposedPlate(along=0.06, across=0.08)),
        (PLATE | {"orientation": "vertical"}, {"speed": "2 m/s"}, ExposedPlate(along=0.08, across=0.06)),
        (PLATE, {"correlation": "horizontal_plate"},
         ExposedPlate(along=0.08, across=0.06, faces=Stand.HORIZONTAL)),
        ({"profile": "rectangular", "length": "60 mm", "width": "9 mm", "thickness": "9 mm"}, {},
         ExposedPin(0.06, pytest.approx(0.036 / 3.141592653589793))),
        ({"profile": "annular", "inner_diameter": "25 mm", "outer_diameter": "55 mm", "thickness": "1 mm"},
         {}, ExposedDisc(0.025, 0.055)),
    ],
)  # fmt: skip
def test_a_fin_is_a_rod_a_plate_or_a_disc(fin: dict[str, str], air: dict[str, str], exposure: object) -> None:
    assert likeness(fin, **air).exposure == exposure


def test_what_is_only_alike_says_so_and_scatters_more() -> None:
    assert likeness(PIN).scatter == 0
    cone = likeness(PIN | {"profile": "cone"})
    assert cone.scatter == BAR_SCATTER
    assert cone.notes == ("a tapered pin is taken as a cylinder of its mean diameter",)


@pytest.mark.parametrize(("width", "exposed"), [(30.0, ExposedPin), (60.0, ExposedPlate)])
def test_a_table_is_a_rod_or_a_plate_by_its_section(tmp_path, width: float, exposed: type) -> None:
    rows = "".join(f"{x},{width * 10},{2 * (width + 10)}\n" for x in (0, 50))
    (tmp_path / "shape.csv").write_text("x [mm],area [mm^2],perimeter [mm]\n" + rows, encoding="utf-8")
    found = likeness({"profile": "table", "file": str(tmp_path / "shape.csv")}, speed="2 m/s")
    assert isinstance(found.exposure, exposed)
    assert found.scatter == BAR_SCATTER
    assert "table" in found.notes[0]


@pytest.mark.parametrize(
    ("fin", "air", "sentence"),
    [
        (PIN, {"correlation": "hilbert", "speed": "2 m/s"}, '[air] correlation: "hilbert" is no correlation; '
         'the nearest known ones are "hilpert", "churchill_bernstein", "churchill_chu_vertical_all".'),
        (PIN, {"correlation": "hilpert", "speed": "0 m/s"}, "[air] correlation: hilpert is for a stream "
         "across a cylinder; for air rising about a horizontal cylinder there are churchill_chu_cylinder, "
         "churchill_chu_cylinder_laminar, morgan_cylinder."),
        (PLATE, {"correlation": "hilpert", "speed": "2 m/s"}, "[air] correlation: hilpert is for a stream "
         "across a cylinder; for a stream along a plate there are flat_plate_laminar, flat_plate_mixed, "
         "flat_plate_turbulent, churchill_ozoe."),
        (PIN, {"correlation": 7}, "[air] correlation: this is no name of a correlation; write one line of 1 "
         "to 80 printable characters in quotes."),
        (PIN, {"speed": "2.5"}, '[air] speed: "2.5" has no unit; write a speed with its unit, such as "2.5 '
         'm/s".'),
        (PIN, {"speed": "2.5 m"}, '[air] speed: the unit "m" is not that of a speed; write a speed with its '
         'unit, such as "2.5 m/s".'),
        (PIN, {"speed": "-1 m/s"}, '[air] speed: "-1 m/s" is negative; write zero or a positive value.'),
        (PIN, {"speed": "1 m/s +/- 2 m/s"}, '[air] speed: the uncertainty in "1 m/s +/- 2 m/s" is as large '
         "as the value; write a standard uncertainty smaller than the value."),
        (PIN, {"pressure": "0 kPa"}, '[air] pressure: "0 kPa" is not above zero; write a positive value.'),
        (PIN, {"pressure": "98 kN"}, '[air] pressure: the unit "kN" is not that of a pressure; write a '
         'pressure with its unit, such as "98 kPa".'),
        (PIN, {"humidity": "0.45"}, '[air] humidity: "0.45" has no unit; write a relative humidity with its '
         'unit, such as "45 %".'),
        (PIN, {"humidity": "145 %"}, '[air] humidity: "145 %" is no relative humidity; write one from 0 % to '
         '100 %, such as "45 %".'),
        (PIN, {"velocity": "2 m/s"}, '[air]: the key "velocity" is unknown; known are temperature, '
         "expected_h, speed, correlation, pressure, humidity, surroundings_temperature."),
    ],
)  # fmt: skip
def test_wrong_air_is_refused_in_a_sentence(fin: dict[str, str], air: dict[str, Any], sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        rig(fin, **air)
    assert str(caught.value) == sentence


def test_a_stated_orientation_does_not_matter_to_driven_air() -> None:
    across = likeness(PIN | {"orientation": "vertical"}, speed="2 m/s").exposure
    assert isinstance(across, ExposedPin)
    assert across.axis is Stand.VERTICAL
