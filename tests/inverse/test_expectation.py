"""What a healthy fin should show, and the air speed that an estimate implies.

Textbook examples are evaluated by their books with tables of their own, so that the film's properties differ
by up to 2 %; the books' answers are those that tests/models/data/convection_examples.json cites.
"""

import json
import math
from dataclasses import replace
from typing import Any

import pytest
from rigs import ZERO, Truth, exact_readings, pin_rig

import finback
from finback import expectation
from finback.estimate import Estimate
from finback.expectation import Expected, ImpliedSpeed, expect, imply
from finback.quantity import Quantity
from finback.readings import Readings
from finback.report import comparison, terminal
from finback.rig import Rig
from finback.surroundings import Surroundings


def rig(fin: dict[str, str], air: dict[str, str], with_air: bool = True) -> Rig:
    sensors: dict[str, Any] = {"T1": {"at": "1 mm"}, "T2": {"at": "9 mm"}}
    if with_air:
        sensors["TA"] = {"on": "air"}
    return Rig.from_dict({"fin": fin, "air": air, "sensors": sensors})


def readings(surface: float, air: float) -> Readings:
    return Readings("a", {"T1": ZERO + surface, "T2": ZERO + surface, "TA": ZERO + air})


def pin(diameter: float, **more: str) -> dict[str, str]:
    return {"profile": "pin", "length": "500 mm", "diameter": f"{diameter} mm", **more}


def plate(along: float) -> dict[str, str]:
    return {
        "profile": "rectangular", "length": "20 mm", "width": f"{along} mm", "thickness": "1 mm",
        "edges": "guarded",
    }  # fmt: skip


def expected(fin: dict[str, str], air: dict[str, str], surface: float, ambient: float) -> Expected:
    found = expect(rig(fin, air), readings(surface, ambient))
    assert found is not None
    return found


@pytest.mark.parametrize(
    ("fin", "air", "surface", "ambient", "h"),
    [
        # Holman, Heat Transfer (in SI Units), Example 6-7: 3100 W/m from a cylinder of 50 mm in 50 m/s
        (pin(50), {"speed": "50 m/s", "correlation": "hilpert"}, 150, 35, 3100 / (math.pi * 0.05 * 115)),
        # Incropera, 6th ed., Example 9.4: a steam pipe of 100 mm in still air, the convective part
        (pin(100, orientation="horizontal"), {"speed": "0 m/s"}, 165, 23, 7.23),
        # Cengel, Heat Transfer: A Practical Approach, 2nd ed., Example 9-1: a hot-water pipe of 80 mm
        (pin(80, orientation="horizontal"), {"speed": "0 m/s"}, 70, 20, 5.869),
        # Incropera, 6th ed., Example 7.1: a plate of 0.5 m in 10 m/s at 6 kPa, cooled from 300 °C: 570 W/m
        (plate(500), {"speed": "10 m/s", "pressure": "6 kPa"}, 27, 300, 570 / (0.5 * 273)),
        # Holman, Example 5-4: a plate of 0.2 m in 2 m/s: 81.2 W over a metre of width
        (plate(200), {"speed": "2 m/s"}, 60, 27, 81.2 / (0.2 * 33)),
    ],
)  # fmt: skip
def test_a_correlation_gives_the_coefficient_of_the_textbook(
    fin: dict[str, str], air: dict[str, str], surface: float, ambient: float, h: float
) -> None:
    found = expected(fin, air, surface, ambient)
    assert found.coefficient == pytest.approx(h, rel=0.02)
    assert 0.05 < found.sd / found.coefficient < 0.25
    assert found.film_temperature == pytest.approx(ZERO + (surface + ambient) / 2)
    assert found.nusselt is not None
    assert found.length is not None
    assert (found.reynolds is None) == (air["speed"] == "0 m/s")
    assert (found.rayleigh is None) != (found.reynolds is None)


def test_what_the_rig_states_comes_first() -> None:
    found = expected(pin(8), {"expected_h": "45 W/(m^2 K) +/- 20 %", "speed": "3 m/s"}, 70, 20)
    assert (found.coefficient, found.sd, found.correlation) == (45, pytest.approx(9), "stated")
    assert found.film_temperature == pytest.approx(ZERO + 45)
    assert found.nusselt is None


def test_a_rig_that_says_nothing_expects_nothing() -> None:
    assert expect(rig(pin(8), {}), readings(70, 20)) is None
    assert imply(rig(pin(8), {}), readings(70, 20), 40.0, 1.0) is None
    assert expect(rig(pin(8), {"correlation": "hilpert"}), readings(70, 20)) is None  # no speed for it
    assert imply(rig(pin(8), {"speed": "0 m/s"}), readings(70, 20), 40.0, 1.0) is None


def test_air_that_no_sensor_reads_is_taken_from_elsewhere() -> None:
    without = rig(pin(8), {"speed": "3 m/s"}, with_air=False)
    read = Readings("a", {"T1": ZERO + 70, "T2": ZERO + 70})
    assert expect(without, read) is None
    assert expect(without, read, air=ZERO + 20) == expected(pin(8), {"speed": "3 m/s"}, 70, 20)


def test_the_mean_temperature_weighs_the_side_and_leaves_out_what_is_set_aside() -> None:
    fin = {"profile": "triangular", "length": "10 mm", "width": "90 mm", "thickness": "1 mm",
           "edges": "guarded"}  # fmt: skip
    wedge = rig(fin, {"speed": "3 m/s"})
    read = Readings("a", {"T1": 360.0, "T2": 344.0, "TA": 300.0})
    # straight lines between 1 mm and 9 mm, level beyond them: the faces weigh every place alike
    assert expectation.mean_temperature(wedge, read) == pytest.approx(352.0, abs=0.01)
    aside = replace(read, excluded={"T2": "broken"})
    assert expectation.mean_temperature(wedge, aside) == pytest.approx(360.0)
    cone = {"profile": "cone", "length": "10 mm", "diameter": "2 mm"}
    assert expectation.mean_temperature(rig(cone, {}), read) > 353.0  # its side lies near the base


def test_uncertain_speed_and_pressure_widen_the_expectation() -> None:
    exact, vague = (
        expected(pin(8), {"speed": speed, "pressure": "98 kPa +/- 1 %"}, 70, 20)
        for speed in ("3 m/s", "3 m/s +/- 20 %")
    )
    assert exact.coefficient == vague.coefficient
    more = math.sqrt(vague.sd**2 - exact.sd**2) / exact.coefficient
    assert more == pytest.approx(0.2 * 0.5, rel=0.15)  # h rises about as the root of the speed here


def test_humid_air_changes_the_expectation_little() -> None:
    dry = expected(pin(8), {"speed": "3 m/s"}, 70, 20)
    humid = expected(pin(8), {"speed": "3 m/s", "humidity": "80 %"}, 70, 20)
    assert humid.coefficient != dry.coefficient
    assert humid.coefficient == pytest.approx(dry.coefficient, rel=0.01)
    assert "the air is dry" in dry.notes
    assert "the air is dry" not in humid.notes


@pytest.mark.parametrize("correlation", [None, "hilpert", "zukauskas_cylinder"])
def test_the_implied_speed_leads_back_to_the_coefficient(correlation: str | None) -> None:
    air = {"speed": "3 m/s"} | ({} if correlation is None else {"correlation": correlation})
    there = expected(pin(8), air, 70, 20)
    back = imply(rig(pin(8), air), readings(70, 20), there.coefficient, 0.02 * there.coefficient)
    assert back is not None
    assert back.speed == pytest.approx(3.0, rel=1e-6)
    assert back.sd is not None
    assert back.sd > 0.02 * 3.0
    assert back.stated == 3.0
    assert back.correlation == there.correlation


def test_a_coefficient_that_no_speed_gives_has_none_and_says_so() -> None:
    found = imply(rig(pin(8), {"correlation": "hilpert"}), readings(70, 20), 5000.0, 1.0)
    assert found is not None
    assert (found.speed, found.sd) == (None, None)
    assert "no speed of the air explains it" in found.flags[0]


def test_a_range_that_is_left_is_a_note() -> None:
    slow = expected(pin(0.1), {"speed": "0.02 m/s", "correlation": "hilpert"}, 70, 20)
    assert slow.flags
    notes = list(expectation.findings(slow, None))
    assert {(note.code, note.severity) for note in notes} == {("out-of-range", "note")}
    assert any("Hilpert" in note.message and "Re from 0.4" in note.message for note in notes)
    assert [note.message for note in notes] == list(dict.fromkeys(slow.flags))


# --- in an estimate ---


def blown(h: float = 45.0, **more: Any) -> Estimate:
    around = more.pop("surroundings", Surroundings(speed=Quantity(1.5, 0.0, "1.5 m/s")))
    bench = pin_rig(tip="convective", conductivity=Quantity(167.0, 5.0), surroundings=around, **more)
    return finback.fit(bench, exact_readings(bench, Truth(h=h)), seed=1)


@pytest.fixture(scope="module")
def estimate() -> Estimate:
    return blown()


def test_an_estimate_holds_both_and_writes_them(estimate: Estimate) -> None:
    healthy, implied = estimate.expected, estimate.implied_speed
    assert healthy is not None
    assert implied is not None
    h = estimate.parameters["h"]
    assert h.median is not None
    written = json.loads(json.dumps(estimate.to_dict(), allow_nan=False))
    assert written["expected"]["h"] == {
        "value": pytest.approx(healthy.coefficient),
        "sd": pytest.approx(healthy.sd),
        "unit": "W/(m^2 K)",
    }
    assert written["expected"]["correlation"] == "churchill_bernstein"
    assert written["expected"]["length"] == {"value": pytest.approx(0.008), "unit": "m", "of": "diameter"}
    assert written["expected"]["film_temperature"]["unit"] == "degC"
    assert written["implied_speed"]["value"] == pytest.approx(implied.speed)
    assert written["implied_speed"]["stated"] == 1.5
    # the two are one law read both ways
    assert (h.median > healthy.coefficient) == (implied.speed > 1.5)


def test_an_estimate_without_them_writes_neither(estimate: Estimate) -> None:
    bare = replace(estimate, expected=None, implied_speed=None)
    assert "expected" not in bare.to_dict()
    assert "implied_speed" not in bare.to_dict()
    assert comparison.compare(bare) is None


def test_h_that_is_left_open_implies_no_speed() -> None:
    bench = pin_rig(places=("air",), tip="convective",
                    surroundings=Surroundings(speed=Quantity(1.5, 0.0, "1.5 m/s")))  # fmt: skip
    found = finback.fit(bench, exact_readings(bench), seed=1)
    assert found.parameters["h"].median is None
    assert found.implied_speed is None
    assert found.expected is not None
    told = comparison.compare(found)
    assert told is not None
    assert told.verdict.endswith("The estimate leaves h open, so the two cannot be compared.")


def test_air_that_cannot_be_is_a_note_and_no_error() -> None:
    around = Surroundings(speed=Quantity(1.5), pressure=Quantity(1000.0), humidity=Quantity(1.0))
    found = blown(surroundings=around)  # saturated vapour alone has 2.6 kPa at 22 °C
    assert found.expected is None
    (note,) = [f.message for f in found.findings if f.evidence.get("key") == "expected"]
    assert note.startswith("What a healthy fin would show cannot be worked out: the vapour pressure")
    assert found.status == "ok"


LAW = "Churchill and Bernstein, cylinder in cross flow"


@pytest.mark.parametrize(
    ("change", "verdict"),
    [
        ({"expected": Expected(45.0, 4.5, "stated", "as the rig states")},
         "A healthy fin would show h = 45.0 W/(m² K) ± 9.0 W/(m² K) (k = 2, 95 %), as the rig states. The "
         "estimate lies 11 % below that, 1.1 combined standard uncertainties: in line with it."),
        ({"expected": Expected(100.0, 10.0, "churchill_bernstein", LAW)},
         f"A healthy fin would show h = 100 W/(m² K) ± 20 W/(m² K) (k = 2, 95 %), after {LAW}. The estimate "
         "lies 60 % below that, 6.0 combined standard uncertainties: more than they explain."),
        ({"expected": Expected(16.0, 0.0, "stated", "as the rig states")},
         "A healthy fin would show h = 16 W/(m² K), as the rig states. The estimate lies 150 % above that, "
         "24 combined standard uncertainties: more than they explain."),
        ({"implied_speed": ImpliedSpeed(2.0, 0.25, "hilpert", "Hilpert", 2.5)},
         "The estimate implies an air speed of 2.00 m/s ± 0.50 m/s (k = 2, 95 %); the rig states 2.5 m/s."),
        ({"implied_speed": ImpliedSpeed(2.0, 0.25, "hilpert", "Hilpert")},
         "The estimate implies an air speed of 2.00 m/s ± 0.50 m/s (k = 2, 95 %)."),
        ({"implied_speed": ImpliedSpeed(None, None, "hilpert", "", 2.5)},
         "No speed of the air explains the estimate."),
    ],
)  # fmt: skip
def test_the_comparison_in_words(estimate: Estimate, change: dict[str, Any], verdict: str) -> None:
    h = replace(estimate.parameters["h"], median=40.0, sd=1.0)
    bare = replace(estimate, parameters={**estimate.parameters, "h": h}, expected=None, implied_speed=None)
    told = comparison.compare(replace(bare, **change))
    assert told is not None
    assert told.verdict == verdict
    assert verdict.split(". ")[0][:40] in terminal.summary(replace(bare, **change)).replace("\n  ", " ")


def test_the_numbers_of_a_correlation_are_named(estimate: Estimate) -> None:
    told = comparison.compare(estimate)
    assert told is not None
    names = [name for name, _ in told.rows]
    assert names == ["correlation", "film temperature", "air", "characteristic length", "Reynolds number Re",
                     "Prandtl number Pr", "Nusselt number Nu"]  # fmt: skip
    rows = dict(told.rows)
    assert rows["correlation"] == f"{LAW} (churchill_bernstein)"
    assert rows["air"] == "1.5 m/s"
    assert rows["characteristic length"] == "diameter, 8 mm"
    assert "the correlation convection alone" in told.notes[0]
    stated = replace(
        estimate, expected=Expected(45.0, 9.0, "stated", "as the rig states"), implied_speed=None
    )
    of_stated = comparison.compare(stated)
    assert of_stated is not None
    assert (of_stated.rows, of_stated.notes) == ((), ())
