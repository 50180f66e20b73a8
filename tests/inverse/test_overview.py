"""The overview: what a rig can tell in principle, and the fin drawn to scale."""

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


def test_the_drawing_is_to_scale() -> None:
    names, fin, scale = overview.draw(rig_with("0", "50", "100", "air")).splitlines()
    marks = [column for column, character in enumerate(fin) if character == "●"]
    assert fin[marks[0] - 1] == "│"
    assert fin[marks[2] + 1] == "│"
    assert marks[1] - marks[0] == pytest.approx((marks[2] - marks[0]) / 2, abs=0.5)
    assert [names.index(name) for name in ("S0", "S1", "S2")] == marks
    assert scale.split() == ["0", "100", "mm"]
    assert scale.rstrip().endswith("100 mm")
    assert len(scale) - 1 == marks[2]


def test_names_without_room_are_left_out_of_the_drawing_and_their_sensors_are_not() -> None:
    rig = rig_with("10", "11", "90", "air")
    names, fin, _ = overview.draw(rig).splitlines()
    assert names.split() == ["S0", "S2"]
    assert fin.count("●") == 3


def test_a_plate_is_drawn_where_one_is_read() -> None:
    assert "plate ▌" in overview.draw(rig_with("10", "90", "air", "plate"))
    assert "plate" not in overview.draw(rig_with("10", "90", "air"))


def test_the_whole_fits_80_columns_and_cannot_write_to_the_terminal() -> None:
    sensors = {f"thermocouple {'x' * 30} {n}": {"at": f"{n} mm", "position": "0.5 mm"} for n in (1, 50, 99)}
    shape = {"profile": "pin", "length": "100 mm", "diameter": "8 mm"}
    rig = Rig.from_dict({"title": "t" * 150, "fin": shape, "sensors": {**sensors, "TA": {"on": "air"}}})
    text = overview.describe(rig, ["run\x1b[2J", "b" * 300], ["adiabatic tip"])
    assert "\x1b" not in text
    assert max(map(len, text.splitlines())) <= 80


def test_it_lists_runs_candidates_and_what_was_assumed() -> None:
    text = overview.describe(rig_with(*ALONG, "air"), ["a", "b"], ["adiabatic tip", "convective tip"])
    assert "2 runs: a, b" in text
    assert "Candidates\n  adiabatic tip\n  convective tip\n" in text
    assert "Assumed\n" in text
    assert "run" not in overview.describe(rig_with(*ALONG, "air"), None, []).split("Candidates")[1].lower()
